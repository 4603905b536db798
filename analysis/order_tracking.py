"""Which order every spot is: prediction with its own uncertainty, then the fit itself.

A spot is compared with every order that could leave at its angle. The distance is
counted in units of the predicted uncertainty (what the bench file does not know about
the geometry, the pitch's range, the reading), so that the gate is wide before a fit
and narrow after one.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.prediction import (
    FitState,
    initial_state,
    predict,
    whitened,
)
from pitchsweep.analysis.records import (
    UNKNOWN_ORDER,
    FloatArray,
    IntArray,
    OrderTable,
    Rejection,
)

GATE_2 = 30.0
"""Squared distance beyond which a spot is no order (2 degrees of freedom: 3e-7)."""
FIRST_GATE_2 = 16.0
"""The same before any fit, when a wrong order costs more than a spot (3e-4)."""
CLEARLY_SECOND_2 = 30.0
"""A second order closer than this makes the spot ambiguous."""
FAR_2 = 1e6
NEAR_GRAZING = 0.05
"""Orders leaving closer to the surface than this cosine (87 deg) are not used: there
the place on the screen bends too sharply for a linear uncertainty."""

MIRRORED = (
    "the zero order moves to -x as the stage turns positive: the x column is "
    "mirrored (a person facing the screen sees +x on the left), or the "
    "bench's stage.direction is wrong; turn one of them over"
)

ORDERS_TURNED = (
    "the orders' signs are turned over: positive orders lie to +x of the zero order "
    "(a person facing the screen sees +x on the left); turn the order column over, or "
    "the x column where x was typed as seen"
)


@dataclass(frozen=True)
class Assignment:
    """Orders (N,), which spots have one, squared distances, and reasons without."""

    order: IntArray
    assigned: NDArray[np.bool_]
    distance_2: FloatArray
    reasons: dict[int, Rejection]


def candidate_orders(problem: FitProblem) -> list[int]:
    """Orders that can leave at some angle: abs(m) * lambda / d < 2."""
    smallest = float(np.min(problem.base[:, 0]))
    most = int(np.floor(2.0 / smallest))
    return list(range(-most, most + 1))


def assign_orders(
    problem: FitProblem,
    *,
    state: FitState | None = None,
    covariance: FloatArray | None = None,
    pitch_u: float,
    scale_2: float = 1.0,
) -> Assignment:
    """Orders by prediction from ``state`` (prior means if None).

    ``covariance`` (P, P) of the parameters, None for the priors with ``pitch_u`` as
    the relative uncertainty of the pitch. ``scale_2`` multiplies the reading's
    variance. Orders given in the table are kept; a given order that cannot leave is
    refused a place.
    """
    at = state or initial_state(problem)
    if covariance is None:
        covariance = _prior_covariance(problem, pitch_u)
    orders = candidate_orders(problem)
    distance_2 = np.full((len(orders), len(problem.table)), FAR_2)
    for row, order in enumerate(orders):
        distance_2[row] = _distance_2(problem, order, at, covariance, scale_2)
    given = problem.table.order != UNKNOWN_ORDER
    for row, order in enumerate(orders):
        distance_2[row, given & (problem.table.order != order)] = FAR_2
    gate_2 = FIRST_GATE_2 if state is None else GATE_2
    found = _choose(problem, np.array(orders, dtype=np.int64), distance_2, gate_2)
    return _without_grazing(problem, found, at)


def _without_grazing(
    problem: FitProblem, found: Assignment, state: FitState
) -> Assignment:
    leaving = predict(problem, found.order, state).leaving
    grazing = found.assigned & (leaving < NEAR_GRAZING)
    reasons = dict(found.reasons)
    for index in np.flatnonzero(grazing):
        reasons[int(index)] = Rejection.GRAZING
    return replace(found, assigned=found.assigned & ~grazing, reasons=reasons)


def _choose(
    problem: FitProblem, orders: IntArray, distance_2: FloatArray, gate_2: float
) -> Assignment:
    ranked = np.argsort(distance_2, axis=0, kind="stable")
    everyone = np.arange(distance_2.shape[1])
    best = distance_2[ranked[0], everyone]
    second = distance_2[ranked[1], everyone] if len(orders) > 1 else best + FAR_2
    order = orders[ranked[0]]
    reasons: dict[int, Rejection] = {}
    assigned = best < gate_2
    for row in np.flatnonzero(~assigned).tolist():
        reasons[row] = Rejection.NO_ORDER
    for row in np.flatnonzero(assigned & (second < CLEARLY_SECOND_2)).tolist():
        assigned[row] = False
        reasons[row] = Rejection.TWO_ORDERS
    for row in _second_best(problem, order, best, assigned):
        assigned[row] = False
        reasons[row] = Rejection.SECOND_BEST
    return Assignment(order, assigned, best, reasons)


CLEARLY_BRIGHTER = 3.0


def _second_best(
    problem: FitProblem,
    order: IntArray,
    distance_2: FloatArray,
    assigned: NDArray[np.bool_],
) -> list[int]:
    """Spots of a step that compete with a better one for the same order.

    A ghost runs beside its order all the way; only its faintness tells it. So a
    clearly brighter spot wins, and among equals the nearer.
    """
    group, brightness = problem.step_group, problem.table.brightness
    rivals: dict[tuple[int, int], list[int]] = {}
    for row in np.flatnonzero(assigned).tolist():
        rivals.setdefault((int(group[row]), int(order[row])), []).append(row)
    losers = []
    for rows in rivals.values():
        kept = rows
        if brightness is not None:
            most = max(float(brightness[row]) for row in rows)
            kept = [row for row in rows if brightness[row] * CLEARLY_BRIGHTER >= most]
        best = min(kept, key=lambda row: float(distance_2[row]))
        losers += [row for row in rows if row != best]
    return losers


def _prior_covariance(problem: FitProblem, pitch_u: float) -> FloatArray:
    u = np.array(
        [
            min(p.u_prior, pitch_u) if index < len(problem.parts) else p.u_prior
            for index, p in enumerate(problem.parameters)
        ]
    )
    return np.diag(u**2)


def _distance_2(
    problem: FitProblem,
    order: int,
    state: FitState,
    covariance: FloatArray,
    scale_2: float,
) -> FloatArray:
    """Squared distance (N,) of every spot from one order, in predicted variances."""
    there = predict(problem, np.full(len(problem.table), order), state)
    measured = np.stack([problem.table.x_mm, problem.table.y_mm], axis=1)
    off = whitened(problem, measured - np.stack([there.x_mm, there.y_mm], axis=1))
    jac = whitened(problem, there.jacobian)
    by_step = whitened(problem, there.by_step) * problem.u_step_rad
    spread = np.einsum("nip,pq,njq->nij", jac, covariance, jac, optimize=True)
    spread += by_step[:, :, None] * by_step[:, None, :] + scale_2 * np.eye(2)
    solved = np.linalg.solve(spread, off[:, :, None])[:, :, 0]
    distance_2 = np.sum(off * solved, axis=1)
    return np.where(there.valid, np.minimum(distance_2, FAR_2), FAR_2)


def lowest_orders(found: Assignment) -> Assignment:
    """Only the zero order and the lowest other order of an assignment.

    An error of the nominal pitch moves order m by m times as much: the lowest are
    the safest to start from.
    """
    others = np.abs(found.order[found.assigned & (found.order != 0)])
    lowest = int(others.min(initial=2**31))
    return replace(found, assigned=found.assigned & (np.abs(found.order) <= lowest))


def mirrored(table: OrderTable) -> OrderTable:
    """The table with x turned over, as a person facing the screen would type it."""
    return replace(table, x_mm=-table.x_mm, cxy_mm2=-table.cxy_mm2)


def orders_turned(table: OrderTable) -> OrderTable:
    """The table with the signs of its given orders turned over."""
    given = table.order != UNKNOWN_ORDER
    return replace(table, order=np.where(given, -table.order, table.order))


def sign_trouble(problem: FitProblem, pitch_u: float) -> str:
    """What is turned over, where the spots make sense only so; else empty.

    The zero order moves to +x by twice the angle whatever the pitch; it is what
    tells a mirrored table. A table of one angle near normal incidence without orders
    cannot tell.
    """
    straight = _misfit(problem, pitch_u)
    if straight < 0.2:
        return ""
    table = problem.table
    tries = [(ORDERS_TURNED, orders_turned(table)), (MIRRORED, mirrored(table))]
    tries.append((MIRRORED, orders_turned(mirrored(table))))
    misfits = [_misfit(replace(problem, table=t), pitch_u) for _, t in tries]
    best = int(np.argmin(misfits))
    return tries[best][0] if misfits[best] < 0.3 * straight else ""


def _misfit(problem: FitProblem, pitch_u: float) -> float:
    """Share of spots without an order at the nominal geometry, 0 to 1."""
    found = assign_orders(problem, pitch_u=pitch_u)
    return float(np.mean(found.distance_2 > GATE_2))
