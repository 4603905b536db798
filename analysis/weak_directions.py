"""Where the data say little about the pitch, in words."""

import math

import numpy as np

from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.joint_fit import JointFit
from pitchsweep.analysis.number_text import significant
from pitchsweep.analysis.records import FloatArray

MOST_NAMED = 3
WORTH_NAMING = 0.1
"""Share of the pitch's variance that an unknown must explain to be named."""
CLOSE = 0.7
"""Correlation beyond which two unknowns are said to trade against each other."""
RELEVANT = 8
"""Pairs are looked for among this many unknowns that go most with the pitch."""


def correlations_with_pitch(fit: JointFit) -> FloatArray:
    """Correlation (P,) of every parameter with the pitch, parameter 0."""
    u = np.sqrt(np.maximum(np.diag(fit.covariance), 0.0))
    scale = np.where(u > 0.0, u, np.inf) * u[0]
    return np.asarray(fit.covariance[0] / scale)


def weak_directions(
    problem: FitProblem, fit: JointFit, pitch_nm: float, extra_nm: float = 0.0
) -> tuple[str, ...]:
    """Sentences on what the pitch trades against; none where nothing stands out.

    Unknowns are picked one after the other, each the one that leaves the smallest
    variance of the pitch if it too were known exactly. ``extra_nm``: u of what the
    budget adds beside the fit.
    """
    picked, left = _picked(fit.covariance)
    if not picked:
        return ()
    names = [problem.parameters[i].name for i in picked]
    u_nm = pitch_nm * math.sqrt(float(fit.covariance[0, 0]))
    now, then = math.hypot(u_nm, extra_nm), math.hypot(u_nm * left**0.5, extra_nm)
    them = "it" if len(picked) == 1 else "them"
    first = (
        f"the pitch trades against {_listed(names)}: knowing {them} exactly would "
        f"bring u from {significant(now)} to {significant(then)} nm"
    )
    correlation = correlations_with_pitch(fit)
    return (first, *_pair(problem, fit.covariance, correlation))


def _picked(covariance: FloatArray) -> tuple[list[int], float]:
    """The unknowns to name, and the share of the pitch's variance without them."""
    picked: list[int] = []
    rest, left = covariance.copy(), 1.0
    while len(picked) < MOST_NAMED:
        spread = np.diag(rest).copy()
        spread[[0, *picked]] = np.inf
        explained = rest[0] ** 2 / np.maximum(spread, 1e-300)
        best = int(np.argmax(explained))
        share = float(explained[best] / covariance[0, 0])
        if not share > WORTH_NAMING:
            break
        picked.append(best)
        left = max(0.0, left - share)
        rest = rest - np.outer(rest[:, best], rest[best]) / rest[best, best]
    return picked, left


def _pair(
    problem: FitProblem, covariance: FloatArray, correlation: FloatArray
) -> tuple[str, ...]:
    """The two unknowns, of those that matter, that can least be told apart."""
    few = np.argsort(-np.abs(correlation[1:]))[:RELEVANT] + 1
    u = np.sqrt(np.diag(covariance)[few])
    among = np.abs(covariance[np.ix_(few, few)] / np.outer(u, u))
    np.fill_diagonal(among, 0.0)
    i, j = np.unravel_index(int(np.argmax(among)), among.shape)
    if not among[i, j] > CLOSE:
        return ()
    one, other = (problem.parameters[few[k]].name for k in sorted((int(i), int(j))))
    return (f"{one} and {other} trade against each other in these data",)


def _listed(names: list[str]) -> str:
    return "; ".join(names)
