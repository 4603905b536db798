"""Where the fit's model puts every spot, and how that depends on the unknowns."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.bench_geometry import Local, landing
from pitchsweep.analysis.fit_parameters import Kind
from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.records import FloatArray, IntArray
from pitchsweep.analysis.screen_map import TERMS, map_basis


@dataclass(frozen=True)
class FitState:
    """Parameter values (P,) as offsets from their prior means, and step errors (S,)."""

    values: FloatArray
    step_error_rad: FloatArray


@dataclass(frozen=True)
class Prediction:
    """Model at a state: positions (N,), their derivatives by every unknown.

    ``slopes`` (P, 2, N) by the parameters, ``step_slope`` (2, N) by the step's error.
    ``valid`` and ``leaving`` as in bench_geometry.Landing.
    """

    x_mm: FloatArray
    y_mm: FloatArray
    slopes: FloatArray
    step_slope: FloatArray
    valid: NDArray[np.bool_]
    leaving: FloatArray

    @property
    def jacobian(self) -> FloatArray:
        """The slopes spot by spot, (N, 2, P); a view."""
        return self.slopes.transpose(2, 1, 0)

    @property
    def by_step(self) -> FloatArray:
        """The slopes by the step's error spot by spot, (N, 2); a view."""
        return self.step_slope.T


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
    by_local = np.ascontiguousarray(there.jacobian.transpose(2, 1, 0))
    straight = by_local.copy()
    moved = []
    for axis, weight in enumerate(_map_terms(problem, state.values)):
        by_x = np.einsum("nt,nt->n", basis.by_x, weight)
        by_y = np.einsum("nt,nt->n", basis.by_y, weight)
        by_local[:, axis] += by_x * straight[:, 0] + by_y * straight[:, 1]
        moved.append(np.einsum("nt,nt->n", basis.value, weight))
    terms = np.ascontiguousarray(basis.value.T)
    slopes = np.zeros((len(problem.parameters), 2, local.shape[0]))
    for slope, parameter in zip(slopes, problem.parameters, strict=True):
        feels = parameter.coefficient
        if parameter.kind is Kind.LOCAL:
            np.multiply(by_local[parameter.column], feels, out=slope)
        elif parameter.kind is Kind.LOG_RATIO:
            np.multiply(by_local[Local.Q], local[:, Local.Q] * feels, out=slope)
        else:
            axis = 0 if parameter.kind is Kind.MAP_X else 1
            np.multiply(terms[parameter.column], feels, out=slope[axis])
    return Prediction(
        x_mm=there.x_mm + moved[0],
        y_mm=there.y_mm + moved[1],
        slopes=slopes,
        step_slope=by_local[Local.INCIDENCE] * problem.direction,
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


def whitened(problem: FitProblem, vectors: FloatArray) -> FloatArray:
    """Whitened copies of (N, 2) or (N, 2, K) screen vectors."""
    if vectors.ndim == 2:
        return np.asarray(np.einsum("nij,nj->ni", problem.whitener, vectors))
    return np.asarray(np.matmul(problem.whitener, vectors))


def residuals(problem: FitProblem, there: Prediction) -> FloatArray:
    """Whitened residuals (N, 2), measured minus predicted."""
    table = problem.table
    off = np.stack([table.x_mm - there.x_mm, table.y_mm - there.y_mm], axis=1)
    return whitened(problem, off)


def distances_2(problem: FitProblem, order: IntArray, state: FitState) -> FloatArray:
    """Squared whitened distances (N,) of the spots from their orders at a state."""
    off = residuals(problem, predict(problem, order, state))
    return np.asarray(np.sum(off**2, axis=1))
