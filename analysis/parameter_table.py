"""The one table of what a joint fit leaves unknown: scope and prior of each.

``parameter_table`` is the table; the functions below write its rows. The angle error
of every step is not in it: the solver eliminates it.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from pitchsweep.analysis.air_index import AirState, air_index, air_index_u
from pitchsweep.analysis.fit_parameters import ARCSEC, Kind, Parameter, Scope, Source
from pitchsweep.analysis.part_ray import Local
from pitchsweep.analysis.records import FloatArray, IntArray, OrderTable
from pitchsweep.analysis.screen_map import TERMS, Y_DEGREE
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part

REFERENCE_C = 20.0
LASER_MAP_SHARE = 0.1
"""How far the map of a second laser may differ from the first's: a lens's colour."""
DRIFT_SHAPES = ((1, 0.5), (2, 0.25))
"""Legendre degree in time and share of the drift's u that each shape carries."""


@dataclass(frozen=True)
class FitScene:
    """What the table of unknowns is made for: spots, bench, parts, air.

    ``part`` and ``run`` (N,) index the spots' parts and runs, ``elapsed`` (N,) runs
    from -1 to 1 over each run.
    """

    table: OrderTable
    bench: Bench
    parts: tuple[Part, ...]
    air: AirState
    part: IntArray
    run: IntArray
    elapsed: FloatArray

    @property
    def everything(self) -> FloatArray:
        """Coefficient of a parameter that every spot feels."""
        return np.ones(len(self.table))


def fit_scene(
    table: OrderTable, bench: Bench, parts: Sequence[Part], air: AirState
) -> FitScene:
    """The scene of a table; time is the steps' order where it was not noted."""
    none = np.zeros(len(table), dtype=np.int64)
    run = table.run if table.run is not None else none
    time = table.time_s if table.time_s is not None else table.step.astype(np.float64)
    elapsed = np.zeros(len(table))
    for r in np.unique(run):
        here = run == r
        low, high = float(np.min(time[here])), float(np.max(time[here]))
        if high > low:
            elapsed[here] = 2.0 * (time[here] - low) / (high - low) - 1.0
    return FitScene(
        table=table,
        bench=bench,
        parts=tuple(parts),
        air=air,
        part=table.part if table.part is not None else none,
        run=run,
        elapsed=elapsed,
    )


def parameter_table(scene: FitScene) -> tuple[Parameter, ...]:
    """Every unknown of the fit; the pitches of the parts come first, in order."""
    return (
        *_pitches(scene),
        *_wavelengths(scene),
        *_air(scene),
        *_temperatures(scene),
        *_screen_and_beam(scene),
        *_parts(scene),
        *_seats(scene),
        *_stage(scene),
        *_drifts(scene),
        *_map(scene),
        *_laser_maps(scene),
    )


def _log_ratio(
    name: str,
    scope: Scope,
    source: Source,
    u: float,
    coefficient: FloatArray,
    unit: str = "1",
    shown_scale: float = 1.0,
    mean: float = 0.0,
) -> Parameter:
    return Parameter(
        name,
        scope,
        source,
        Kind.LOG_RATIO,
        u,
        unit,
        shown_scale,
        coefficient,
        mean=mean,
    )


def base_pitch_nm(part: Part) -> float:
    """The pitch at 20 deg C that a part's pitch is counted from."""
    return part.nominal_pitch_nm if part.certified is None else part.certified.pitch_nm


def strain(part: Part) -> float:
    """Thermal strain of the part against 20 deg C (ISO 1, from memory)."""
    material = part.material
    return material.expansion_per_K * (material.temperature_C - REFERENCE_C)


def _of(scene: FitScene, index: int, name: str) -> str:
    """A name, with its part where there are several."""
    several = len(scene.parts) > 1
    return f"{name}, part {scene.parts[index].part}" if several else name


def _on(scene: FitScene, index: int) -> FloatArray:
    return np.asarray(scene.part == index, dtype=np.float64)


def _pitches(scene: FitScene) -> Iterator[Parameter]:
    for index, part in enumerate(scene.parts):
        base = base_pitch_nm(part)
        certified = part.certified
        yield _log_ratio(
            _of(scene, index, "pitch"),
            Scope.PART,
            Source.PITCH,
            np.inf if certified is None else certified.u_pitch_nm / base,
            -_on(scene, index),
            "nm",
            base,
            base,
        )


def _wavelengths(scene: FitScene) -> Iterator[Parameter]:
    for index, name in enumerate(scene.table.laser_names):
        laser = scene.bench.lasers[name]
        yield _log_ratio(
            f"wavelength of {name}",
            Scope.LASER,
            Source.WAVELENGTH,
            laser.u_wavelength_nm / laser.vacuum_wavelength_nm,
            (scene.table.laser == index).astype(np.float64),
            "nm",
            laser.vacuum_wavelength_nm,
            laser.vacuum_wavelength_nm,
        )


def _air(scene: FitScene) -> Iterator[Parameter]:
    bench = scene.bench.air
    u = AirState(bench.u_temperature_C, bench.u_pressure_hPa, bench.u_humidity_percent)
    first = scene.bench.lasers[scene.table.laser_names[0]].vacuum_wavelength_nm
    index = air_index(first, scene.air)
    u_relative = air_index_u(first, scene.air, u) / index
    yield _log_ratio(
        "air index", Scope.EVERYTHING, Source.AIR, u_relative, -scene.everything,
        "1", index, index,
    )  # fmt: skip


def _temperatures(scene: FitScene) -> Iterator[Parameter]:
    for index, part in enumerate(scene.parts):
        material = part.material
        warm = abs(material.expansion_per_K) * material.u_temperature_C
        stretch = abs(material.temperature_C - REFERENCE_C) * material.u_expansion_per_K
        for label, source, u in (
            ("strain by temperature", Source.TEMPERATURE, warm),
            ("strain by expansion coefficient", Source.EXPANSION, stretch),
        ):
            if u > 0.0:
                name = _of(scene, index, label)
                on = -_on(scene, index)
                yield _log_ratio(name, Scope.PART, source, u, on, "1e-6", 1e6)


def _local(
    name: str,
    scope: Scope,
    source: Source,
    column: Local,
    u: float,
    shown: tuple[str, float],
    coefficient: FloatArray,
    mean: float = 0.0,
) -> Parameter:
    unit, scale = shown
    return Parameter(
        name, scope, source, Kind.LOCAL, u, unit, scale, coefficient, column, mean
    )


MM = ("mm", 1.0)
MRAD = ("mrad", 1e3)
DEG = ("deg", float(np.rad2deg(1.0)))


def _screen_and_beam(scene: FitScene) -> Iterator[Parameter]:
    screen, beam = scene.bench.screen, scene.bench.beam
    tilt, climb = screen.u_tilt_mrad * 1e-3, beam.u_elevation_mrad * 1e-3
    for label, source, column, u, shown, mean in (
        (
            "screen distance",
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
        yield _local(
            label, Scope.BENCH, source, column, u, shown, scene.everything, mean
        )


def _parts(scene: FitScene) -> Iterator[Parameter]:
    """What belongs to a part however it is seated."""
    for index, part in enumerate(scene.parts):
        yield _local(
            _of(scene, index, "cover thickness"),
            Scope.PART,
            Source.COVER,
            Local.COVER,
            part.u_cover_mm,
            MM,
            _on(scene, index),
            part.cover_mm,
        )
        yield _local(
            _of(scene, index, "curvature"),
            Scope.PART,
            Source.CURVATURE,
            Local.CURVATURE,
            part.u_curvature_per_m * 1e-3,
            ("1/m", 1e3),
            _on(scene, index),
        )


def _seats(scene: FitScene) -> Iterator[Parameter]:
    """How each part sits, one set a mount."""
    zero = float(np.deg2rad(scene.bench.stage.u_zero_deg))
    for index, part in enumerate(scene.parts):
        mine = scene.part == index
        for mount in np.unique(scene.table.mount_deg[mine]):
            here = (mine & (scene.table.mount_deg == mount)).astype(np.float64)
            azimuth, tilt = part.u_groove_azimuth_mrad, part.u_tilt_mrad
            surface = part.u_surface_offset_mm
            for label, column, u, shown, feels in (
                # The incidence is the stage angle minus the zero offset.
                ("zero offset", Local.INCIDENCE, zero, DEG, -here),
                ("groove azimuth", Local.AZIMUTH, azimuth * 1e-3, MRAD, here),
                ("part tilt", Local.TILT, tilt * 1e-3, MRAD, here),
                ("surface offset", Local.SURFACE, surface, MM, here),
            ):
                name = _of(scene, index, f"{label}, mount {mount:g} deg")
                yield _local(name, Scope.MOUNT, Source.SEAT, column, u, shown, feels)


def _stage(scene: FitScene) -> Iterator[Parameter]:
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
            yield _local(
                f"stage error, {k} per turn, {label}",
                Scope.BENCH,
                source,
                Local.INCIDENCE,
                # An amplitude of given rms size in unknown phase.
                float(size * ARCSEC / np.sqrt(2.0)),
                ("arcsec", 1.0 / ARCSEC),
                np.asarray(stage.direction * wave(k * reading)),
            )
    yield _local(
        "stage scale",
        Scope.BENCH,
        Source.SCALE,
        Local.INCIDENCE,
        stage.u_scale_ppm * 1e-6,
        ("ppm", 1e6),
        stage.direction * reading,
    )


def _drifts(scene: FitScene) -> Iterator[Parameter]:
    """Smooth wandering in time, of each run by itself."""
    drift, lasers = scene.bench.drift, scene.bench.lasers
    runs = np.unique(scene.run)
    for run in runs:
        here = scene.run == run
        suffix = f", run {run + 1}" if len(runs) > 1 else ""
        for degree, share in DRIFT_SHAPES:
            shape = _legendre(degree, scene.elapsed) * here
            label = f"{'linear' if degree == 1 else 'bent'}{suffix}"
            point = share * drift.u_pointing_urad * 1e-6
            shift = share * drift.u_camera_shift_um * 1e-3
            for what, column, u, shown in (
                ("camera shift x", Local.SCREEN_X, shift, ("um", 1e3)),
                ("camera shift y", Local.SCREEN_Y, shift, ("um", 1e3)),
                ("beam turn", Local.BEAM_TURN, point, ("urad", 1e6)),
                ("beam climb", Local.ELEVATION, point, ("urad", 1e6)),
            ):
                name = f"{what}, {label}"
                yield _local(name, Scope.RUN, Source.DRIFT, column, u, shown, shape)
            yield from _scale_drift(scene, share, shape, label)
            for index, laser in enumerate(scene.table.laser_names):
                feels = shape * (scene.table.laser == index)
                u = share * lasers[laser].u_drift_pm * 1e-3
                nm = lasers[laser].vacuum_wavelength_nm
                name = f"wavelength drift of {laser}, {label}"
                yield _log_ratio(
                    name, Scope.RUN, Source.DRIFT, u / nm, feels, "pm", nm * 1e3
                )


def _scale_drift(
    scene: FitScene, share: float, shape: FloatArray, label: str
) -> Iterator[Parameter]:
    """The camera's scale: the linear map terms, growing with the shape."""
    ppm = share * scene.bench.drift.u_camera_scale_ppm * 1e-6
    for kind, axis, term, half_mm in (
        (Kind.MAP_X, "x", Y_DEGREE + 1, scene.bench.screen.width_mm / 2.0),
        (Kind.MAP_Y, "y", 1, scene.bench.screen.height_mm / 2.0),
    ):
        yield Parameter(
            f"camera scale {axis}, {label}",
            Scope.RUN,
            Source.DRIFT,
            kind,
            ppm * half_mm,
            "ppm",
            1e6 / half_mm,
            shape,
            term,
        )


def _legendre(degree: int, x: FloatArray) -> FloatArray:
    return x if degree == 1 else np.asarray(1.5 * x**2 - 0.5)


def _map(scene: FitScene) -> Iterator[Parameter]:
    u_term = float(scene.bench.screen.u_map_mm / np.sqrt(TERMS))
    for kind, axis in ((Kind.MAP_X, "x"), (Kind.MAP_Y, "y")):
        for term in range(TERMS):
            name = f"screen map {axis} term {term}"
            yield Parameter(
                name, Scope.BENCH, Source.MAP, kind, u_term, *MM, scene.everything, term
            )


def _laser_maps(scene: FitScene) -> Iterator[Parameter]:
    """The first terms once more for every laser after the first."""
    u = float(LASER_MAP_SHARE * scene.bench.screen.u_map_mm / np.sqrt(TERMS))
    for index, laser in enumerate(scene.table.laser_names[1:], start=1):
        feels = (scene.table.laser == index).astype(np.float64)
        for kind, axis in ((Kind.MAP_X, "x"), (Kind.MAP_Y, "y")):
            for term in (0, 1, Y_DEGREE + 1, Y_DEGREE + 2):
                name = f"screen map {axis} term {term} of {laser}"
                yield Parameter(
                    name, Scope.LASER, Source.MAP, kind, u, *MM, feels, term
                )
