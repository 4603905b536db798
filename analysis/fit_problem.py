"""The joint fit's problem: spots, unknowns, and the geometry at the prior means."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.air_index import AirState, air_index
from pitchsweep.analysis.fit_parameters import ARCSEC, Parameter
from pitchsweep.analysis.fit_scene import (
    FitScene,
    WavelengthJump,
    base_pitch_nm,
    counted_rms_mm,
    fit_scene,
    strain,
    track_per_mm,
)
from pitchsweep.analysis.parameter_table import parameter_table
from pitchsweep.analysis.part_ray import COVER_INDEX, N_LOCAL, Local
from pitchsweep.analysis.records import FloatArray, IntArray, OrderTable
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part


@dataclass(frozen=True)
class FitProblem:
    """Everything the solver needs besides the orders; made by ``fit_problem``.

    ``base`` (N, N_LOCAL) local quantities with every parameter at its prior mean
    (column Q holds lambda/d, without the order). ``step_group`` (N,) numbers the
    steps, ``by_step`` (N,) sorts by them and ``step_starts`` (S,) says where each
    begins; ``whitener`` (N, 2, 2) turns residuals into independent unit-variance ones.
    The first parameters are the pitches of ``parts``, in order. ``run`` and ``time``
    (N,) say when each spot was seen.
    """

    table: OrderTable
    parameters: tuple[Parameter, ...]
    base: FloatArray
    step_group: IntArray
    by_step: IntArray
    step_starts: IntArray
    n_steps: int
    u_step_rad: float
    direction: int
    whitener: FloatArray
    half_width_mm: float
    half_height_mm: float
    parts: tuple[Part, ...]
    run: IntArray
    time: FloatArray
    jumps: tuple[WavelengthJump, ...] = ()

    def sum_by_step(self, rows: FloatArray) -> FloatArray:
        """Sums (S, ...) of ``rows`` (N, ...) over the spots of each step."""
        return np.asarray(np.add.reduceat(rows[self.by_step], self.step_starts))


def fit_problem(
    table: OrderTable,
    bench: Bench,
    parts: Sequence[Part],
    air: AirState,
    jumps: Sequence[WavelengthJump] = (),
) -> FitProblem:
    """The joint fit of the parts' spots on one bench, with ``jumps`` in it."""
    scene = fit_scene(table, bench, parts, air, jumps)
    keys = np.stack(
        [table.step, table.laser, np.round(table.mount_deg * 1e6), scene.run], axis=1
    )
    _, group = np.unique(keys, axis=0, return_inverse=True)
    group = group.reshape(-1).astype(np.int64)
    by_step = np.argsort(group, kind="stable")
    n_steps = int(group.max(initial=-1)) + 1
    return FitProblem(
        table=table,
        parameters=parameter_table(scene),
        base=_base(scene),
        step_group=group,
        by_step=by_step,
        step_starts=np.searchsorted(group[by_step], np.arange(n_steps)),
        n_steps=n_steps,
        u_step_rad=bench.stage.u_repeatability_arcsec * ARCSEC,
        direction=bench.stage.direction,
        whitener=whitener(table),
        half_width_mm=bench.screen.width_mm / 2.0,
        half_height_mm=bench.screen.height_mm / 2.0,
        parts=scene.parts,
        run=scene.run,
        time=scene.time,
        jumps=scene.jumps,
    )


def some_rows(problem: FitProblem, keep: NDArray[np.bool_] | IntArray) -> FitProblem:
    """The problem of the spots that ``keep`` (mask or indices) selects."""
    _, group = np.unique(problem.step_group[keep], return_inverse=True)
    group = group.reshape(-1).astype(np.int64)
    by_step = np.argsort(group, kind="stable")
    n_steps = int(group.max(initial=-1)) + 1
    return replace(
        problem,
        table=problem.table.take(keep),
        parameters=tuple(
            replace(p, coefficient=p.coefficient[keep]) for p in problem.parameters
        ),
        base=problem.base[keep],
        step_group=group,
        by_step=by_step,
        step_starts=np.searchsorted(group[by_step], np.arange(n_steps)),
        n_steps=n_steps,
        whitener=problem.whitener[keep],
    )


def _base(scene: FitScene) -> FloatArray:
    table, bench = scene.table, scene.bench
    vacuum = [bench.lasers[n].vacuum_wavelength_nm for n in table.laser_names]
    in_air = np.array([nm / air_index(nm, scene.air) for nm in vacuum])
    swept = np.array([base_pitch_nm(p) * (1.0 + strain(p)) for p in scene.parts])
    of_part = {
        Local.COVER: [p.cover_mm for p in scene.parts],
        Local.INDEX: [p.cover_index - COVER_INDEX for p in scene.parts],
        Local.TRACK: [track_per_mm(p) for p in scene.parts],
        Local.BEAM_RMS: [counted_rms_mm(p, bench.beam) for p in scene.parts],
    }
    base = np.zeros((len(table), N_LOCAL))
    base[:, Local.Q] = in_air[table.laser] / swept[scene.part]
    base[:, Local.INCIDENCE] = np.deg2rad(
        bench.stage.direction * wrapped_deg(table.stage_deg - table.mount_deg)
    )
    base[:, Local.DISTANCE] = bench.screen.distance_mm
    base[:, Local.FAR] = bench.screen.kind == "camera-at-infinity"
    for column, each in of_part.items():
        base[:, column] = np.array(each)[scene.part]
    base[:, Local.TRACK] *= np.round(np.cos(np.deg2rad(scene.face_deg)))
    return base


def wrapped_deg(angle_deg: FloatArray) -> FloatArray:
    """Angles brought into -180 to 180 degrees."""
    return (angle_deg + 180.0) % 360.0 - 180.0


def whitener(table: OrderTable) -> FloatArray:
    """Inverse Cholesky factor (N, 2, 2) of each spot's covariance."""
    ux, uy = table.ux_mm, table.uy_mm
    limit = 0.999 * ux * uy
    c = np.clip(table.cxy_mm2, -limit, limit)
    low = np.zeros((len(table), 2, 2))
    low[:, 0, 0] = 1.0 / ux
    down = np.sqrt(uy**2 - (c / ux) ** 2)
    low[:, 1, 1] = 1.0 / down
    low[:, 1, 0] = -c / (ux**2 * down)
    return low
