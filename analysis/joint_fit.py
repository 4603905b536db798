"""The joint least squares over all steps and orders, with exact elimination of steps.

Damped Gauss-Newton; priors are extra residuals. Cost is linear in the number of steps:
see normal_equations.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.bench_geometry import Local
from pitchsweep.analysis.damped_descent import descend, inverse
from pitchsweep.analysis.fit_problem import FitProblem, some_rows
from pitchsweep.analysis.normal_equations import (
    Blocks,
    Normal,
    cut_in_blocks,
    information,
    normal_equations,
    solve,
)
from pitchsweep.analysis.prediction import FitState, initial_state, local_quantities
from pitchsweep.analysis.records import FloatArray, IntArray

MAX_ITERATIONS = 40
SETTLED = 1e-11
"""The last step promised to lower the sum of squares by less than this, that is, it
moved no combination of unknowns by more than the root of it, in its own u."""
ROUGHLY_SETTLED = 1e-5
MANY_STEPS = 1000
"""A fit of more steps starts from where a fit of some of them ends."""
SOME_STEPS = 400
LOST_SHARE = 0.05
"""A step that makes more than this share of the spots evanescent is too long."""


@dataclass(frozen=True)
class JointFit:
    """The minimum: state, covariance (P, P), and what the spots say there.

    ``residual`` (N, 2) whitened, measured minus fitted; ``used`` (N,) which spots
    carried weight; ``step_pull`` (P, S) covariance of the parameters with each step's
    error; ``step_variance`` (S,) variance of the step errors; ``objective`` the
    sum of squares with priors.
    """

    state: FitState
    covariance: FloatArray
    residual: FloatArray
    x_mm: FloatArray
    y_mm: FloatArray
    incidence_rad: FloatArray
    used: NDArray[np.bool_]
    step_pull: FloatArray
    step_variance: FloatArray
    objective: float
    iterations: int
    converged: bool


def solve_joint_fit(
    problem: FitProblem,
    order: IntArray,
    weight: FloatArray,
    start: FitState | None = None,
    settled: float = SETTLED,
) -> JointFit:
    """The minimum over parameters and step errors for given orders and weights.

    ``order`` (N,) diffraction orders; ``weight`` (N,) multiplies each spot's squared
    residual, 0 leaves it out. Spots whose order does not leave at the trial state are
    left out of that iteration and come back. ``settled``: see SETTLED. Raises
    numpy.linalg.LinAlgError when the information is singular.
    """
    blocks = cut_in_blocks(problem, order, weight)

    def step(point: Normal, damping: float) -> tuple[Normal, float]:
        move, step_move = solve(point, blocks.prior, damping)
        promised = float(move @ point.right + step_move @ point.right_step)
        state = point.state
        moved = FitState(state.values + move, state.step_error_rad + step_move)
        return normal_equations(blocks, moved), promised

    def fall(point: Normal, trial: Normal) -> float:
        return _fall(point, trial, weight)

    if start is None:
        start = _start(problem, order, weight)
    end = descend(
        normal_equations(blocks, start),
        step=step,
        fall=fall,
        settled=settled,
        most=MAX_ITERATIONS,
    )
    return _finish(blocks, order, end.point, end.iterations, end.converged)


def _start(problem: FitProblem, order: IntArray, weight: FloatArray) -> FitState:
    """Prior means; of many steps, the parameters that some of them give."""
    plain = initial_state(problem)
    if problem.n_steps <= MANY_STEPS:
        return plain
    every = problem.n_steps // SOME_STEPS
    rows = np.flatnonzero(problem.step_group % every == 0)
    try:
        some = solve_joint_fit(
            some_rows(problem, rows),
            order[rows],
            weight[rows],
            settled=ROUGHLY_SETTLED,
        )
    except np.linalg.LinAlgError:
        return plain
    return replace(plain, values=some.state.values) if some.converged else plain


def _fall(point: Normal, trial: Normal, weight: FloatArray) -> float:
    """By how much a trial lowers the sum of squares over the spots both states have.

    Losing spots lowers a plain sum; the common ones alone tell.
    """
    both = point.used & trial.used
    if both.sum() < (1.0 - LOST_SHARE) * point.used.sum():
        return -np.inf
    return point.cost(weight * both) - trial.cost(weight * both)


def one_step(
    problem: FitProblem, order: IntArray, state: FitState, weight: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """One undamped step from ``state`` and the covariance there: (P,), (P, P)."""
    blocks = cut_in_blocks(problem, order, weight)
    normal = normal_equations(blocks, state)
    move, _ = solve(normal, blocks.prior, 0.0)
    return move, inverse(information(normal, blocks.prior))


def _finish(
    blocks: Blocks, order: IntArray, normal: Normal, iterations: int, converged: bool
) -> JointFit:
    covariance = inverse(information(normal, blocks.prior))
    scaled_border = normal.border / normal.diagonal
    step_pull = -covariance @ scaled_border
    local = local_quantities(blocks.problem, order, normal.state)
    return JointFit(
        state=normal.state,
        covariance=covariance,
        residual=normal.residual,
        x_mm=normal.x_mm,
        y_mm=normal.y_mm,
        incidence_rad=local[:, Local.INCIDENCE],
        used=normal.used,
        step_pull=step_pull,
        step_variance=1.0 / normal.diagonal - np.sum(step_pull * scaled_border, axis=0),
        objective=normal.cost(blocks.weight * normal.used),
        iterations=iterations,
        converged=converged,
    )
