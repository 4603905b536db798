"""The pitch's distribution when every input of the joint fit is drawn (JCGM 101).

Inputs are the readings with their covariance, the prior means and the step errors. The
draws are stratified along the direction in which the pitch depends on them to first
order: each draw is still a draw of all inputs, but a block fills that direction evenly,
so that blocks differ only by what the fit makes of the inputs beyond first order. That
is why blocks may be smaller than the 10^4 draws that JCGM 101 recommends.
"""

import math
from dataclasses import dataclass

import numpy as np
from scipy.special import ndtri

from pitchsweep.analysis.drawn_descent import (
    DrawnInputs,
    Minimum,
    drawn_minima,
    first_order,
    minimum_of,
    side_by_side,
)
from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.joint_fit import JointFit
from pitchsweep.analysis.monte_carlo import JUDGING, Propagated, adaptive_draws
from pitchsweep.analysis.records import FloatArray, IntArray

ROWS_AT_ONCE = 4096
"""Spots times draws that are traced in one go."""
SMALLEST_BLOCK, LARGEST_BLOCK, MOST_DRAWS = 500, 10_000, 200_000


@dataclass(frozen=True)
class Stated:
    """What draws take from the stated result.

    The pitch is ``base_nm`` * exp(parameter 0). ``readings_dof``: degrees of freedom
    of the readings' scatter, which makes them a multivariate t; infinite where it is
    known. ``extra_nm``: u of what the budget adds beside the fit.
    """

    base_nm: float
    coverage: float
    readings_dof: float
    extra_nm: float


def redrawn_pitch(
    problem: FitProblem,
    order: IntArray,
    fit: JointFit,
    stated: Stated,
    generator: np.random.Generator,
) -> Propagated:
    """Mean, u and interval of the pitch in nm, settled well enough to judge U."""
    at = minimum_of(problem, order, fit)

    def draw(count: int) -> FloatArray:
        values = drawn_values(at, count, stated.readings_dof, generator)
        beside = stated.extra_nm * generator.standard_normal(count)
        return np.asarray(stated.base_nm * np.exp(values) + beside)

    enough = math.ceil(100.0 / (1.0 - stated.coverage))
    block = min(LARGEST_BLOCK, max(enough, SMALLEST_BLOCK))
    return adaptive_draws(
        draw, coverage=stated.coverage, block=block, most=MOST_DRAWS, share=JUDGING
    )


def drawn_values(
    at: Minimum, count: int, readings_dof: float, generator: np.random.Generator
) -> FloatArray:
    """Parameter 0 (count,) of ``count`` draws of all inputs; NaN for a lost one."""
    along = first_order(at)
    places = ndtri((generator.permutation(count) + generator.random(count)) / count)
    share = max(1, ROWS_AT_ONCE // len(at.problem.table))
    copies, values = side_by_side(at.problem, share), []
    for first in range(0, count, share):
        place = places[first : first + share]
        if len(place) < share:
            copies = side_by_side(at.problem, len(place))
        drawn = _draw(along, place, generator)
        drawn = _as_scattered(drawn, readings_dof, generator)
        values.append(drawn_minima(at, copies, drawn))
    return np.concatenate(values)


def _draw(
    along: DrawnInputs, place: FloatArray, generator: np.random.Generator
) -> DrawnInputs:
    """Normal inputs whose first-order effect is ``place`` (B,) in its own u."""
    b = len(place)
    readings = generator.standard_normal((b, *along.readings.shape[1:]))
    priors = generator.standard_normal((b, along.priors.shape[1]))
    steps = generator.standard_normal((b, along.steps.shape[1]))
    length_2 = sum(
        float(np.sum(a**2)) for a in (along.readings, along.priors, along.steps)
    )
    effect = np.einsum("bni,ni->b", readings, along.readings[0])
    effect += priors @ along.priors[0] + steps @ along.steps[0]
    add = (place * math.sqrt(length_2) - effect) / length_2
    return DrawnInputs(
        readings + add[:, None, None] * along.readings,
        priors + add[:, None] * along.priors,
        steps + add[:, None] * along.steps,
    )


def _as_scattered(
    drawn: DrawnInputs, dof: float, generator: np.random.Generator
) -> DrawnInputs:
    """The readings of each draw at a scatter that is itself known to ``dof`` only."""
    if not math.isfinite(dof):
        return drawn
    factor = np.sqrt(dof / generator.chisquare(dof, len(drawn.priors)))
    readings = drawn.readings * factor[:, None, None]
    return DrawnInputs(readings, drawn.priors, drawn.steps)
