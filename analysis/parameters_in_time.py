"""Unknowns of the screen map, and of what wanders during a run."""

from collections.abc import Iterator

import numpy as np

from pitchsweep.analysis.fit_parameters import Kind, Parameter, Scope, Source
from pitchsweep.analysis.fit_scene import MM, FitScene, local_row, log_ratio
from pitchsweep.analysis.part_ray import Local
from pitchsweep.analysis.records import FloatArray
from pitchsweep.analysis.screen_map import TERMS, Y_DEGREE

LASER_MAP_SHARE = 0.1
"""How far the map of a second laser may differ from the first's: a lens's colour."""
DRIFT_SHAPES = ((1, 0.5), (2, 0.25))
"""Legendre degree in time and share of the drift's u that each shape carries."""


def screen_map(scene: FitScene) -> Iterator[Parameter]:
    u_term = float(scene.bench.screen.u_map_mm / np.sqrt(TERMS))
    for kind, axis in ((Kind.MAP_X, "x"), (Kind.MAP_Y, "y")):
        for term in range(TERMS):
            name = f"screen map {axis} term {term}"
            yield Parameter(
                name, Scope.BENCH, Source.MAP, kind, u_term, *MM, scene.everything, term
            )


def laser_maps(scene: FitScene) -> Iterator[Parameter]:
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


def drifts(scene: FitScene) -> Iterator[Parameter]:
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
                yield local_row(name, Scope.RUN, Source.DRIFT, column, u, shown, shape)
            yield from _scale_drift(scene, share, shape, label)
            for index, laser in enumerate(scene.table.laser_names):
                feels = shape * (scene.table.laser == index)
                u = share * lasers[laser].u_drift_pm * 1e-3
                nm = lasers[laser].vacuum_wavelength_nm
                name = f"wavelength drift of {laser}, {label}"
                yield log_ratio(
                    name, Scope.RUN, Source.DRIFT, u / nm, feels, "pm", nm * 1e3
                )


def wavelength_jumps(scene: FitScene) -> Iterator[Parameter]:
    """The size of every jump, felt by all spots of its laser since then."""
    for number, jump in enumerate(scene.jumps, start=1):
        name = scene.table.laser_names[jump.laser]
        laser = scene.bench.lasers[name]
        nm = laser.vacuum_wavelength_nm
        feels = (
            (scene.table.laser == jump.laser)
            & (scene.run == jump.run)
            & (scene.time >= jump.since)
        )
        yield log_ratio(
            f"wavelength jump {number} of {name}",
            Scope.RUN,
            Source.JUMP,
            laser.u_jump_pm * 1e-3 / nm,
            feels.astype(np.float64),
            "pm",
            nm * 1e3,
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
