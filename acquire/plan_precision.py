"""How well a plan will know the pitch, before a single frame of it is taken (pure).

The Fisher bound of the spots that the plan will see, with the fit's own model and all
its priors; no spot is made up but for where the nominal grating puts it.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pitchsweep.acquire.sweep_plan import Step
from pitchsweep.analysis.air_index import AirState
from pitchsweep.analysis.fit_problem import FitProblem, fit_problem
from pitchsweep.analysis.joint_fit import JointFit, solve_joint_fit
from pitchsweep.analysis.order_visibility import visible_orders
from pitchsweep.analysis.prediction import initial_state, predict
from pitchsweep.analysis.records import IntArray, OrderTable
from pitchsweep.analysis.what_would_help import Sweep, what_would_help
from pitchsweep.configs.job_model import Job

FEWEST_SPOTS = 3


@dataclass(frozen=True)
class PlanPrecision:
    """Relative standard uncertainty to expect, and what would better it most."""

    relative_u: float
    advice: tuple[str, ...] = ()


def plan_precision(
    job: Job, steps: Sequence[Step], *, advise: bool = False
) -> PlanPrecision | None:
    """What ``steps`` of the job's plan will give; None where that is no pitch.

    Spots count as read to the bench's ``reading_u_mm``. ``advise``: also say what
    would help, with the pitch taken as nominal.
    """
    table, order = _expected(job, steps)
    if len(table) < FEWEST_SPOTS or not (order != 0).any():
        return None
    air = job.bench.air
    state = AirState(air.temperature_C, air.pressure_hPa, air.humidity_percent)
    problem = fit_problem(table, job.bench, (job.part,), state)
    there = predict(problem, order, initial_state(problem))
    table = replace(table, x_mm=there.x_mm, y_mm=there.y_mm)
    problem = fit_problem(table, job.bench, (job.part,), state)
    fit = _fitted(problem, order, there.valid)
    if fit is None:
        return None
    relative = float(np.sqrt(fit.covariance[0, 0]))
    if not advise:
        return PlanPrecision(relative)
    sweep = Sweep(problem, order, fit, job.bench, state)
    return PlanPrecision(relative, what_would_help(sweep, job.part.nominal_pitch_nm))


def _fitted(
    problem: FitProblem, order: IntArray, valid: NDArray[np.bool_]
) -> JointFit | None:
    try:
        return solve_joint_fit(problem, order, valid.astype(np.float64))
    except np.linalg.LinAlgError:
        return None


def _expected(job: Job, steps: Sequence[Step]) -> tuple[OrderTable, IntArray]:
    lasers = job.recipe.lasers
    rows: list[tuple[Step, int, float]] = []
    for step in steps:
        view = visible_orders(job.bench, job.part, step.laser, step.incidence_deg)
        rows += [
            (step, int(m), float(x))
            for m, x, seen in zip(view.orders, view.x_mm[0], view.seen[0], strict=True)
            if seen
        ]
    u = np.full(len(rows), job.bench.reading_u_mm)
    order = np.array([m for _, m, _ in rows], dtype=np.int64)
    table = OrderTable(
        step=np.array([s.step for s, _, _ in rows], dtype=np.int64),
        stage_deg=np.array([s.stage_deg for s, _, _ in rows], dtype=np.float64),
        mount_deg=np.array([s.mount_deg for s, _, _ in rows], dtype=np.float64),
        laser=np.array([lasers.index(s.laser) for s, _, _ in rows], dtype=np.int64),
        laser_names=lasers,
        order=order,
        x_mm=np.array([x for _, _, x in rows], dtype=np.float64),
        y_mm=np.zeros(len(rows)),
        ux_mm=u,
        uy_mm=u.copy(),
        cxy_mm2=np.zeros(len(rows)),
        time_s=np.array([s.planned_s for s, _, _ in rows], dtype=np.float64),
    )
    return table, order
