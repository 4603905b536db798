"""Least squares by damped Gauss-Newton steps: the loop, and its normal equations.

The loop knows nothing of what is fitted: a point is whatever the caller can take a step
from. Sums of squares are in units of the readings' variance.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Generic, TypeVar

import numpy as np

from pitchsweep.analysis.records import FloatArray

ROUNDING = 1e-6
"""A step that promises less than this and gains nothing is lost in rounding."""
KEPT = 0.1
"""A step that keeps less than this share of its promise is a shot in the dark."""
FIRST_DAMPING, LEAST_DAMPING = 1e-3, 1e-6

Point = TypeVar("Point")


@dataclass(frozen=True)
class Descent(Generic[Point]):
    """Where the descent ended, after how many trial steps, and whether it settled."""

    point: Point
    iterations: int
    converged: bool


def descend(
    start: Point,
    *,
    step: Callable[[Point, float], tuple[Point, float]],
    fall: Callable[[Point, Point], float],
    settled: float,
    most: int,
) -> Descent[Point]:
    """The minimum near ``start``.

    ``step`` (point, damping) gives a trial point and by how much the sum of squares
    should fall to it; ``fall`` (point, trial) by how much it does, minus infinity
    where the trial will not do. A step that falls far short of its promise is tried
    again shorter: it may end where nothing slopes any more. The descent has settled
    when an undamped step promises less than ``settled``.
    """
    point, damping, iterations, converged = start, 0.0, 0, False
    while iterations < most and not converged:
        iterations += 1
        trial, promised = step(point, damping)
        fallen = fall(point, trial)
        lost_in_rounding = promised < ROUNDING and fallen > -ROUNDING
        if not (fallen >= KEPT * promised or lost_in_rounding):
            # Rounding alone may keep the last digits from going down any further.
            converged = promised < ROUNDING
            damping = max(10.0 * damping, FIRST_DAMPING)
            continue
        point = trial
        damping = damping / 10.0 if damping > LEAST_DAMPING else 0.0
        converged = promised < settled and damping == 0.0
    return Descent(point, iterations, converged)


def damped_solution(
    information: FloatArray, right: FloatArray, damping: float
) -> FloatArray:
    """The move (P,) for normal equations (P, P), damped on their unit diagonal.

    Raises numpy.linalg.LinAlgError where they are singular.
    """
    scale = _unit_diagonal(information)
    scaled = information * np.outer(scale, scale)
    scaled[np.diag_indices_from(scaled)] += damping
    return np.asarray(scale * np.linalg.solve(scaled, scale * right))


def inverse(information: FloatArray) -> FloatArray:
    """Inverse of a symmetric positive matrix, scaled to unit diagonal first."""
    scale = _unit_diagonal(information)
    found = np.linalg.inv(information * np.outer(scale, scale))
    found = 0.5 * (found + found.T)
    return np.asarray(found * np.outer(scale, scale))


def _unit_diagonal(matrix: FloatArray) -> FloatArray:
    return np.asarray(1.0 / np.sqrt(np.maximum(np.diag(matrix), 1e-300)))
