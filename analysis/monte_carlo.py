"""Propagation of distributions by Monte Carlo, as many draws as a tolerance asks for.

JCGM 101 7.9 (adaptive procedure) and 8 (validation), from memory: blocks of draws are
added until twice the standard deviation of the mean of the blocks' results is below the
tolerance for the estimate, its u and both ends of the interval. Where the draws are to
judge another evaluation at a tolerance, they must themselves be settled to a fifth of
it.
"""

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from pitchsweep.analysis.records import FloatArray

DIGITS = 2
"""Significant digits of u that count."""
FEWEST_BLOCKS = 5
"""JCGM 101 would stop after two, whose scatter can be small by chance."""
JUDGING = 0.2
"""Share of the tolerance to which draws settle that judge another interval (8.2)."""
MOST_LOST = 1e-3
"""Share of the draws that may give no value."""

DrawBlock = Callable[[int], FloatArray]


@dataclass(frozen=True)
class Propagated:
    """What the draws give: mean, standard deviation, ends of the interval.

    ``lost`` draws gave no value (NaN) and are left out. ``settled`` is False where the
    draws ran out before the tolerance was met, or too many were lost.
    """

    mean: float
    u: float
    low: float
    high: float
    draws: int
    lost: int
    settled: bool


def tolerance_of(u: float, digits: int = DIGITS) -> float:
    """Half of the last place of ``u`` written with ``digits`` digits (7.9.2)."""
    place = math.floor(math.log10(u)) - digits + 1
    if round(u / 10.0**place) >= 10**digits:
        place += 1
    return 0.5 * 10.0**place


def adaptive_draws(
    draw: DrawBlock,
    *,
    coverage: float,
    block: int,
    most: int,
    share: float = 1.0,
) -> Propagated:
    """Draws until they are settled to ``share`` of the tolerance of their u.

    ``draw`` (n) gives n values of the result; it is asked for ``block`` at a time, at
    most ``most`` in all. The interval is probabilistically symmetric.
    """
    values, drawn = np.zeros(0), 0
    figures: list[FloatArray] = []
    while True:
        given = draw(block)
        drawn += block
        kept = given[np.isfinite(given)]
        values = np.concatenate([values, kept])
        figures.append(_figures(kept, coverage))
        mean, u, low, high = (float(f) for f in _figures(values, coverage))
        lost = drawn - len(values)
        settled = _settled(np.stack(figures), share * tolerance_of(u))
        settled = settled and lost <= MOST_LOST * drawn
        if settled or drawn + block > most:
            return Propagated(mean, u, low, high, drawn, lost, settled)


def _figures(values: FloatArray, coverage: float) -> FloatArray:
    """Mean, standard deviation, low and high end of values (n,)."""
    tails = ((1.0 - coverage) / 2.0, (1.0 + coverage) / 2.0)
    low, high = np.quantile(values, tails, method="hazen")
    return np.array([np.mean(values), np.std(values, ddof=1), low, high])


def _settled(figures: FloatArray, tolerance: float) -> bool:
    count = len(figures)
    if count < FEWEST_BLOCKS:
        return False
    scatter = np.std(figures, axis=0, ddof=1) / math.sqrt(count)
    return bool(np.all(2.0 * scatter < tolerance))


def agrees(drawn: Propagated, *, low: float, high: float, tolerance: float) -> bool:
    """Whether an interval found otherwise is the drawn one within ``tolerance``.

    JCGM 101 8.1: both ends are to agree. Draws that did not settle bear nothing out.
    """
    apart = max(abs(low - drawn.low), abs(high - drawn.high))
    return drawn.settled and apart <= tolerance
