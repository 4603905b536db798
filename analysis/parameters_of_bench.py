"""Unknowns of the bench: lasers, air, screen, beam, stage."""

from collections.abc import Iterator

import numpy as np

from pitchsweep.analysis.air_index import AirState, air_index, air_index_u
from pitchsweep.analysis.fit_parameters import ARCSEC, Parameter, Scope, Source
from pitchsweep.analysis.fit_scene import MM, MRAD, FitScene, local_row, log_ratio
from pitchsweep.analysis.part_ray import Local
from pitchsweep.analysis.stage_travel import came_from


def wavelengths(scene: FitScene) -> Iterator[Parameter]:
    for index, name in enumerate(scene.table.laser_names):
        laser = scene.bench.lasers[name]
        yield log_ratio(
            f"wavelength of {name}",
            Scope.LASER,
            Source.WAVELENGTH,
            laser.u_wavelength_nm / laser.vacuum_wavelength_nm,
            (scene.table.laser == index).astype(np.float64),
            "nm",
            laser.vacuum_wavelength_nm,
            laser.vacuum_wavelength_nm,
        )


def air(scene: FitScene) -> Iterator[Parameter]:
    bench = scene.bench.air
    u = AirState(bench.u_temperature_C, bench.u_pressure_hPa, bench.u_humidity_percent)
    first = scene.bench.lasers[scene.table.laser_names[0]].vacuum_wavelength_nm
    index = air_index(first, scene.air)
    u_relative = air_index_u(first, scene.air, u) / index
    yield log_ratio(
        "air index", Scope.EVERYTHING, Source.AIR, u_relative, -scene.everything,
        "1", index, index,
    )  # fmt: skip


def screen_and_beam(scene: FitScene) -> Iterator[Parameter]:
    screen, beam = scene.bench.screen, scene.bench.beam
    tilt, climb = screen.u_tilt_mrad * 1e-3, beam.u_elevation_mrad * 1e-3
    far = screen.kind == "camera-at-infinity"
    for label, source, column, u, shown, mean in (
        (
            "focal length" if far else "screen distance",
            Source.SCREEN,
            Local.DISTANCE,
            screen.u_distance_mm,
            MM,
            screen.distance_mm,
        ),
        ("screen tilt about x", Source.SCREEN, Local.SCREEN_TX, tilt, MRAD, 0.0),
        ("screen tilt about y", Source.SCREEN, Local.SCREEN_TY, tilt, MRAD, 0.0),
        ("screen roll about z", Source.SCREEN, Local.SCREEN_TZ, tilt, MRAD, 0.0),
        ("screen offset x", Source.SCREEN, Local.SCREEN_X, screen.u_offset_mm, MM, 0.0),
        ("screen offset y", Source.SCREEN, Local.SCREEN_Y, screen.u_offset_mm, MM, 0.0),
        ("beam elevation", Source.BEAM, Local.ELEVATION, climb, MRAD, 0.0),
        ("beam offset", Source.BEAM, Local.BEAM_X, beam.u_offset_mm, MM, 0.0),
        ("beam height", Source.BEAM, Local.BEAM_Y, beam.u_height_mm, MM, 0.0),
    ):
        yield local_row(
            label, Scope.BENCH, source, column, u, shown, scene.everything, mean
        )
    if screen.u_lens_distortion_mm is not None:
        half = screen.width_mm / 2.0
        yield local_row(
            "lens distortion at half the width",
            Scope.BENCH,
            Source.LENS,
            Local.DISTORTION,
            screen.u_lens_distortion_mm / half**3,
            ("mm", half**3),
            scene.everything,
        )


def stage(scene: FitScene) -> Iterator[Parameter]:
    """Errors periodic in the stage's *reading*, and its scale."""
    stage = scene.bench.stage
    reading = np.deg2rad(scene.table.stage_deg)
    waves = [
        (k, size, Source.HARMONICS)
        for k, size in enumerate(stage.u_harmonics_arcsec, start=1)
    ]
    if stage.worm_per_turn is not None:
        waves.append((stage.worm_per_turn, stage.u_worm_arcsec, Source.WORM))
    for k, size, source in waves:
        for label, wave in (("sine", np.sin), ("cosine", np.cos)):
            yield local_row(
                f"stage error, {k} per turn, {label}",
                Scope.BENCH,
                source,
                Local.INCIDENCE,
                # An amplitude of given rms size in unknown phase.
                float(size * ARCSEC / np.sqrt(2.0)),
                ("arcsec", 1.0 / ARCSEC),
                np.asarray(stage.direction * wave(k * reading)),
            )
    yield local_row(
        "stage scale",
        Scope.BENCH,
        Source.SCALE,
        Local.INCIDENCE,
        stage.u_scale_ppm * 1e-6,
        ("ppm", 1e6),
        stage.direction * reading,
    )
    yield from _leftover_backlash(scene)


def _leftover_backlash(scene: FitScene) -> Iterator[Parameter]:
    """Half of it to either side, where the stage came from both."""
    stage = scene.bench.stage
    side = came_from(scene.table.step, scene.table.stage_deg, scene.run)
    if not (side > 0.0).any() or not (side < 0.0).any():
        return
    yield local_row(
        "leftover backlash",
        Scope.BENCH,
        Source.BACKLASH,
        Local.INCIDENCE,
        stage.u_backlash_arcsec * ARCSEC,
        ("arcsec", 1.0 / ARCSEC),
        0.5 * stage.direction * side,
    )
