"""From an order table to a clean joint fit: assign, down-weight, reject, repeat."""

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.analysis_errors import InputRefused, NoResult
from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.joint_fit import ROUGHLY_SETTLED, JointFit, solve_joint_fit
from pitchsweep.analysis.order_tracking import (
    Assignment,
    assign_orders,
    lowest_orders,
    sign_trouble,
)
from pitchsweep.analysis.prediction import FitState, distances_2, initial_state
from pitchsweep.analysis.records import FloatArray, IntArray, Rejection

GATE = 5.0
"""Spots further off their fitted place than this many (scaled) u are left out."""
SOFT = 3.0
ROUNDS = 6
MEDIAN_2 = 2.0 * math.log(2.0)
"""Median of chi-squared with two degrees of freedom."""


@dataclass(frozen=True)
class CleanFit:
    """A converged fit, orders (N,), used spots (N,), reasons of the unused ones."""

    fit: JointFit
    order: IntArray
    used: NDArray[np.bool_]
    reasons: dict[int, Rejection]


def clean_fit(
    problem: FitProblem, pitch_u: float, first: Assignment | None = None
) -> CleanFit:
    """The joint fit of all spots that belong to orders.

    ``pitch_u`` relative range of the nominal pitch; ``first`` orders to start from
    instead of those that the nominal pitch predicts. Raises InputRefused for a
    mirrored table, NoResult when no order but the zero order is seen.
    """
    trouble = sign_trouble(problem, pitch_u) if first is None else ""
    if trouble:
        raise InputRefused(trouble)
    found = first or assign_orders(problem, pitch_u=pitch_u)
    require_orders(problem, found.order, found.assigned)
    start = lowest_orders(found) if first is None else found
    fit, scale_2 = _soft_fit(problem, start, initial_state(problem))
    for _ in range(ROUNDS):
        previous = found
        found = assign_orders(
            problem,
            state=fit.state,
            covariance=fit.covariance,
            pitch_u=pitch_u,
            scale_2=max(1.0, scale_2),
        )
        require_orders(problem, found.order, found.assigned)
        fit, scale_2 = _soft_fit(problem, found, fit.state)
        if _same(previous, found):
            break
    return _gated(problem, found, fit)


def require_orders(
    problem: FitProblem, order: IntArray, assigned: NDArray[np.bool_]
) -> None:
    """Raises NoResult unless an order other than zero is among the spots."""
    if not assigned.any():
        raise NoResult(
            f"none of the {len(problem.table)} spots lies where the bench file and the "
            "nominal pitch put an order; check part, laser, mount and screen distance"
        )
    if not (order[assigned] != 0).any():
        raise NoResult(
            "only the zero order is among the spots; it obeys the law of reflection "
            "whatever the pitch, so it cannot give one"
        )


def _same(a: Assignment, b: Assignment) -> bool:
    return bool(
        np.array_equal(a.assigned, b.assigned)
        and np.array_equal(a.order[a.assigned], b.order[b.assigned])
    )


def residual_2(fit: JointFit) -> FloatArray:
    """Squared length (N,) of the whitened residuals."""
    return np.asarray(np.sum(fit.residual**2, axis=1))


def _scale_2(distance_2: FloatArray, used: NDArray[np.bool_]) -> float:
    """Robust variance factor of the readings from the median residual, at least 1."""
    if used.sum() < 8:
        return 1.0
    return max(1.0, float(np.median(distance_2[used]) / MEDIAN_2))


def _soft_fit(
    problem: FitProblem, found: Assignment, start: FitState
) -> tuple[JointFit, float]:
    """Fit with weights that fade with distance, so that wild spots do not steer."""
    distance_2 = distances_2(problem, found.order, start)
    weight, _ = _faded(distance_2, found.assigned)
    fit = solve_joint_fit(problem, found.order, weight, start, ROUGHLY_SETTLED)
    scale_2 = 1.0
    for _ in range(ROUNDS):
        faded, scale_2 = _faded(residual_2(fit), found.assigned & fit.used)
        faded = np.where(fit.used, faded, found.assigned * 1.0)
        if np.max(np.abs(faded - weight), initial=0.0) < 0.02:
            break
        weight = faded
        fit = solve_joint_fit(problem, found.order, weight, fit.state, ROUGHLY_SETTLED)
    return fit, scale_2


@dataclass(frozen=True)
class SoftFit:
    """A fit that leans on no spot too much: weights (N,), scatter of the readings."""

    fit: JointFit
    weight: FloatArray
    scale_2: float


def softened(problem: FitProblem, clean: CleanFit) -> SoftFit:
    """The fit of ``clean`` once more with the spots that it found off their tracks."""
    kept = dict(clean.reasons)
    assigned = clean.used.copy()
    for row, why in clean.reasons.items():
        if why is Rejection.OFF_TRACK:
            assigned[row] = True
            del kept[row]
    found = Assignment(clean.order, assigned, residual_2(clean.fit), kept)
    fit, _ = _soft_fit(problem, found, clean.fit.state)
    weight, scale_2 = _faded(residual_2(fit), assigned & fit.used)
    fit = solve_joint_fit(problem, clean.order, weight, fit.state)
    return SoftFit(fit, weight, scale_2)


def _faded(distance_2: FloatArray, used: NDArray[np.bool_]) -> tuple[FloatArray, float]:
    """Weights (N,) fading with the distance, and the variance factor they rest on."""
    scale_2 = _scale_2(distance_2, used)
    return np.asarray(used / (1.0 + distance_2 / (SOFT**2 * scale_2))), scale_2


def _gated(problem: FitProblem, found: Assignment, fit: JointFit) -> CleanFit:
    """Full weight inside the gate, none outside, until the set stands still."""
    keep = np.zeros_like(found.assigned)
    for _ in range(12):
        distance_2 = residual_2(fit)
        scale_2 = _scale_2(distance_2, found.assigned & fit.used)
        inside = found.assigned & (distance_2 < GATE**2 * scale_2)
        if np.array_equal(inside, keep):
            break
        keep = inside
        require_orders(problem, found.order, keep)
        fit = solve_joint_fit(problem, found.order, keep.astype(np.float64), fit.state)
    reasons = dict(found.reasons)
    for index in np.flatnonzero(found.assigned & ~keep):
        reasons[int(index)] = Rejection.OFF_TRACK
    for index in np.flatnonzero(keep & ~fit.used):
        reasons[int(index)] = Rejection.GRAZING
    return CleanFit(fit, found.order, fit.used & keep, reasons)


def rescaled(problem: FitProblem, factor: float) -> FitProblem:
    """The problem with every reading's u multiplied by ``factor``."""
    table = problem.table
    wider = replace(
        table,
        ux_mm=table.ux_mm * factor,
        uy_mm=table.uy_mm * factor,
        cxy_mm2=table.cxy_mm2 * factor**2,
    )
    return replace(problem, table=wider, whitener=problem.whitener / factor)
