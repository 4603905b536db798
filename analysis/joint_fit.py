"""The joint least squares over all steps and orders, with exact elimination of steps.

The normal matrix is a small dense block (the parameters) bordered by one diagonal entry
a step (its angle error); the steps are eliminated by the Schur complement, so cost is
linear in the number of steps. Damped Gauss-Newton; priors are extra residuals.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.bench_geometry import Local, landing
from pitchsweep.analysis.damped_descent import damped_solution, descend, inverse
from pitchsweep.analysis.fit_parameters import Kind
from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.records import FloatArray, IntArray
from pitchsweep.analysis.screen_map import TERMS, map_basis

MAX_ITERATIONS = 40
SETTLED = 1e-14
"""The last step promised to lower the sum of squares by less than this, that is, it
moved no combination of unknowns by more than the root of it, in its own u."""
ROUGHLY_SETTLED = 1e-5


@dataclass(frozen=True)
class FitState:
    """Parameter values (P,) as offsets from their prior means, and step errors (S,)."""

    values: FloatArray
    step_error_rad: FloatArray


@dataclass(frozen=True)
class Prediction:
    """Model at a state: positions (N,), derivatives (N, 2, P) and by the step error.

    ``valid`` and ``leaving`` as in bench_geometry.Landing.
    """

    x_mm: FloatArray
    y_mm: FloatArray
    jacobian: FloatArray
    by_step: FloatArray
    valid: NDArray[np.bool_]
    leaving: FloatArray


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


def initial_state(problem: FitProblem) -> FitState:
    """Everything at its prior mean."""
    return FitState(np.zeros(len(problem.parameters)), np.zeros(problem.n_steps))


def local_quantities(
    problem: FitProblem, order: IntArray, state: FitState
) -> FloatArray:
    """Local quantities (N, N_LOCAL) of the spots for given orders and state."""
    local = problem.base.copy()
    log_ratio = np.zeros(local.shape[0])
    for parameter, value in zip(problem.parameters, state.values, strict=True):
        if parameter.kind is Kind.LOCAL:
            local[:, parameter.column] += value * parameter.coefficient
        elif parameter.kind is Kind.LOG_RATIO:
            log_ratio += value * parameter.coefficient
    local[:, Local.Q] *= order * np.exp(log_ratio)
    local[:, Local.INCIDENCE] += (
        problem.direction * state.step_error_rad[problem.step_group]
    )
    return local


def predict(problem: FitProblem, order: IntArray, state: FitState) -> Prediction:
    """Positions and derivatives of all spots; invalid rows are told, not NaN."""
    local = local_quantities(problem, order, state)
    there = landing(local)
    basis = map_basis(
        there.x_mm, there.y_mm, problem.half_width_mm, problem.half_height_mm
    )
    terms = _map_terms(problem, state.values)
    slopes = there.jacobian.copy()
    moved = []
    for axis, weight in enumerate(terms):
        by_x = np.einsum("nt,nt->n", basis.by_x, weight)
        by_y = np.einsum("nt,nt->n", basis.by_y, weight)
        slopes[:, axis] += by_x[:, None] * there.jacobian[:, 0]
        slopes[:, axis] += by_y[:, None] * there.jacobian[:, 1]
        moved.append(np.einsum("nt,nt->n", basis.value, weight))
    jacobian = np.zeros((local.shape[0], 2, len(problem.parameters)))
    for index, parameter in enumerate(problem.parameters):
        feels = parameter.coefficient
        if parameter.kind is Kind.LOCAL:
            jacobian[:, :, index] = slopes[:, :, parameter.column] * feels[:, None]
        elif parameter.kind is Kind.LOG_RATIO:
            weight = local[:, Local.Q] * feels
            jacobian[:, :, index] = slopes[:, :, Local.Q] * weight[:, None]
        else:
            axis = 0 if parameter.kind is Kind.MAP_X else 1
            jacobian[:, axis, index] = basis.value[:, parameter.column] * feels
    return Prediction(
        x_mm=there.x_mm + moved[0],
        y_mm=there.y_mm + moved[1],
        jacobian=jacobian,
        by_step=slopes[:, :, Local.INCIDENCE] * problem.direction,
        valid=there.valid,
        leaving=there.leaving,
    )


def _map_terms(
    problem: FitProblem, values: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Weight of every map term at every spot, (N, TERMS) for x and for y."""
    shape = (problem.base.shape[0], TERMS)
    terms = {Kind.MAP_X: np.zeros(shape), Kind.MAP_Y: np.zeros(shape)}
    for parameter, value in zip(problem.parameters, values, strict=True):
        if parameter.kind in terms:
            weight = terms[parameter.kind]
            weight[:, parameter.column] += value * parameter.coefficient
    return terms[Kind.MAP_X], terms[Kind.MAP_Y]


@dataclass(frozen=True)
class _Normal:
    """The bordered normal equations at a state, steps still in."""

    dense: FloatArray  # (P, P) without priors
    border: FloatArray  # (P, S)
    diagonal: FloatArray  # (S,) with the step prior
    right: FloatArray  # (P,)
    right_step: FloatArray  # (S,)
    residual: FloatArray  # (N, 2) whitened, unweighted
    prediction: Prediction
    used: NDArray[np.bool_]
    objective: float


_Point = tuple[FitState, _Normal]


def _prior_weight(problem: FitProblem) -> FloatArray:
    u = np.array([parameter.u_prior for parameter in problem.parameters])
    return np.where(np.isfinite(u), 1.0 / u**2, 0.0)


def whitened(problem: FitProblem, vectors: FloatArray) -> FloatArray:
    """Whitened copies of (N, 2) or (N, 2, K) screen vectors."""
    if vectors.ndim == 2:
        return np.asarray(np.einsum("nij,nj->ni", problem.whitener, vectors))
    return np.asarray(np.matmul(problem.whitener, vectors))


def distances_2(problem: FitProblem, order: IntArray, state: FitState) -> FloatArray:
    """Squared whitened distances (N,) of the spots from their orders at a state."""
    there = predict(problem, order, state)
    measured = np.stack([problem.table.x_mm, problem.table.y_mm], axis=1)
    off = whitened(problem, measured - np.stack([there.x_mm, there.y_mm], axis=1))
    return np.asarray(np.sum(off**2, axis=1))


def _normal(
    problem: FitProblem, order: IntArray, state: FitState, weight: FloatArray
) -> _Normal:
    there = predict(problem, order, state)
    measured = np.stack([problem.table.x_mm, problem.table.y_mm], axis=1)
    residual = whitened(problem, measured - np.stack([there.x_mm, there.y_mm], axis=1))
    used = there.valid & (weight > 0.0)
    root = np.sqrt(np.where(used, weight, 0.0))[:, None]
    jac = whitened(problem, there.jacobian) * root[:, :, None]
    by_step = whitened(problem, there.by_step) * root
    res = residual * root
    n, p = jac.shape[0], jac.shape[2]
    flat = jac.reshape(2 * n, p)
    prior = _prior_weight(problem)
    border = problem.sum_by_step(np.einsum("nip,ni->np", jac, by_step))
    step_weight = 1.0 / problem.u_step_rad**2
    diagonal = step_weight + np.bincount(
        problem.step_group, np.sum(by_step**2, axis=1), problem.n_steps
    )
    right_step = np.bincount(
        problem.step_group, np.sum(by_step * res, axis=1), problem.n_steps
    )
    return _Normal(
        dense=flat.T @ flat,
        border=border.T,
        diagonal=np.asarray(diagonal, dtype=np.float64),
        right=flat.T @ res.reshape(-1) - prior * state.values,
        right_step=right_step - step_weight * state.step_error_rad,
        residual=residual,
        prediction=there,
        used=used,
        objective=float(
            np.sum(res**2)
            + np.sum(prior * state.values**2)
            + step_weight * np.sum(state.step_error_rad**2)
        ),
    )


def _solve(
    normal: _Normal, prior: FloatArray, damping: float
) -> tuple[FloatArray, FloatArray]:
    """Parameter and step moves for one damped step."""
    scaled_border = normal.border / normal.diagonal
    reduced = normal.dense + np.diag(prior) - scaled_border @ normal.border.T
    right = normal.right - scaled_border @ normal.right_step
    move = damped_solution(reduced, right, damping)
    step_move = (normal.right_step - normal.border.T @ move) / normal.diagonal
    return move, step_move


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
    prior = _prior_weight(problem)

    def at(state: FitState) -> _Point:
        return state, _normal(problem, order, state, weight)

    def step(point: _Point, damping: float) -> tuple[_Point, float]:
        state, normal = point
        move, step_move = _solve(normal, prior, damping)
        promised = float(move @ normal.right + step_move @ normal.right_step)
        moved = FitState(state.values + move, state.step_error_rad + step_move)
        return at(moved), promised

    def no_worse(point: _Point, trial: _Point) -> bool:
        return _no_worse(problem, *point, *trial, weight)

    end = descend(
        at(start or initial_state(problem)),
        step=step,
        no_worse=no_worse,
        settled=settled,
        most=MAX_ITERATIONS,
    )
    state, normal = end.point
    return _finish(problem, order, state, normal, prior, end.iterations, end.converged)


LOST_SHARE = 0.05
"""A step that makes more than this share of the spots evanescent is too long."""


def _no_worse(
    problem: FitProblem,
    state: FitState,
    normal: _Normal,
    trial: FitState,
    candidate: _Normal,
    weight: FloatArray,
) -> bool:
    """Whether a trial lowers the sum of squares over the spots both states have.

    Losing spots lowers a plain sum; the common ones alone tell.
    """
    both = normal.used & candidate.used
    if both.sum() < (1.0 - LOST_SHARE) * normal.used.sum():
        return False
    shared = weight * both

    def objective(at: FitState, there: _Normal) -> float:
        prior = float(np.sum(_prior_weight(problem) * at.values**2))
        steps = float(np.sum(at.step_error_rad**2)) / problem.u_step_rad**2
        return prior + steps + float(shared @ np.sum(there.residual**2, axis=1))

    return objective(trial, candidate) <= objective(state, normal) * (1.0 + 1e-12)


def one_step(
    problem: FitProblem, order: IntArray, state: FitState, weight: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """One undamped step from ``state`` and the covariance there: (P,), (P, P)."""
    prior = _prior_weight(problem)
    normal = _normal(problem, order, state, weight)
    move, _ = _solve(normal, prior, 0.0)
    scaled_border = normal.border / normal.diagonal
    information = normal.dense + np.diag(prior) - scaled_border @ normal.border.T
    return move, inverse(information)


def _finish(
    problem: FitProblem,
    order: IntArray,
    state: FitState,
    normal: _Normal,
    prior: FloatArray,
    iterations: int,
    converged: bool,
) -> JointFit:
    scaled_border = normal.border / normal.diagonal
    information = normal.dense + np.diag(prior) - scaled_border @ normal.border.T
    covariance = inverse(information)
    local = local_quantities(problem, order, state)
    step_variance = 1.0 / normal.diagonal + np.einsum(
        "ps,pq,qs->s", scaled_border, covariance, scaled_border, optimize=True
    )
    return JointFit(
        state=state,
        covariance=covariance,
        residual=normal.residual,
        x_mm=normal.prediction.x_mm,
        y_mm=normal.prediction.y_mm,
        incidence_rad=local[:, Local.INCIDENCE],
        used=normal.used,
        step_pull=-covariance @ scaled_border,
        step_variance=step_variance,
        objective=normal.objective,
        iterations=iterations,
        converged=converged,
    )
