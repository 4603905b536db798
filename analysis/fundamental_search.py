"""The one fundamental whose multiples all orders are, with nothing known of the pitch.

Works on the directions of the spots in units of the nominal lambda/d. Candidates come
from the dense places among them, divided by small whole numbers; each is scored by
the spots that fold onto its multiples, less what chance alone would fold.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.stats import binom, poisson

from pitchsweep.analysis.records import FloatArray, IntArray
from pitchsweep.analysis.zero_track import GATE

BoolArray = NDArray[np.bool_]

LARGEST_DIVISOR = 8
"""The lowest order seen in a dense place may be as high as this."""
AS_GOOD = 0.05
"""Scores closer than this are equal; among equals the largest fundamental counts."""
LARGEST_CHANCE = 0.5
"""Where chance folds more than this share of the spots, folding says nothing."""
FALSE_ALARM = 1e-4
FEWEST_IN_A_PLACE = 4


@dataclass(frozen=True)
class Fold:
    """How the spots fold onto multiples of ``fundamental`` (in nominal lambda/d).

    ``order`` (N,) nearest multiples, ``explained`` (N,) within the gate and not zero.
    ``score`` share of the spots explained beyond chance; ``false_alarms`` how many
    candidates as good chance would give; ``u`` of the fundamental.
    """

    fundamental: float
    u: float
    order: IntArray
    explained: BoolArray
    score: float
    false_alarms: float


@dataclass(frozen=True)
class Place:
    """A dense place among the directions: centre and number of spots."""

    centre: float
    spots: int


def dense_places(ratio: FloatArray, u: FloatArray) -> list[Place]:
    """Dense places, densest first: windows of twice the gate, emptied one by one.

    ``ratio`` (K,) and ``u`` (K,): directions and their uncertainties.
    """
    order = np.argsort(ratio, kind="stable")
    left, width = ratio[order], GATE * u[order]
    places: list[Place] = []
    fewest = max(FEWEST_IN_A_PLACE, int(0.01 * ratio.size))
    while left.size >= fewest and len(places) < 40:
        last = np.searchsorted(left, left + width, side="right")
        first = int(np.argmax(last - np.arange(left.size)))
        inside = left[first : last[first]]
        if inside.size < fewest:
            break
        centre = float(np.median(inside))
        places.append(Place(centre, int(inside.size)))
        keep = np.abs(left - centre) > width
        left, width = left[keep], width[keep]
    return places


def fold(
    ratio: FloatArray, u: FloatArray, usable: BoolArray, fundamental: float
) -> Fold:
    """The spots folded onto multiples of a fundamental, refined on those explained.

    ``usable`` (N,): the spots to be explained; all spots get an order.
    """
    order = np.zeros(ratio.shape[0], dtype=np.int64)
    explained = np.zeros_like(usable)
    u_fundamental = np.inf
    for _ in range(4):
        order = np.rint(ratio / fundamental).astype(np.int64)
        off = np.abs(ratio - order * fundamental) / u
        explained = usable & (order != 0) & (off < GATE)
        if not explained.any():
            break
        weight = order[explained] / u[explained] ** 2
        information = float(weight @ order[explained])
        fundamental = float(weight @ ratio[explained]) / information
        u_fundamental = information**-0.5
    chance = float(np.mean(np.minimum(1.0, 2.0 * GATE * u[usable] / fundamental)))
    n, hits = int(usable.sum()), int(explained.sum())
    if chance > LARGEST_CHANCE:
        score = 0.0
    else:
        score = (hits / n - chance) / (1.0 - chance)
    return Fold(
        fundamental=fundamental,
        u=u_fundamental,
        order=order,
        explained=explained,
        score=score,
        false_alarms=float(binom.sf(hits - 1, n, chance)),
    )


def search_fundamental(
    ratio: FloatArray, u: FloatArray, usable: BoolArray
) -> Fold | None:
    """The largest fundamental that explains the spots best, None if nothing does.

    The half and the third are taken where spots in between ask for them.
    """
    if usable.sum() < 2:
        return None
    size, size_u = np.abs(ratio[usable]), u[usable]
    tried = {
        place.centre / divisor
        for place in dense_places(size, size_u)[:12]
        for divisor in range(1, LARGEST_DIVISOR + 1)
        if place.centre > 0.0
    }
    folds = [fold(ratio, u, usable, value) for value in tried]
    if not folds:
        return None
    best = max(found.score for found in folds)
    good = [f for f in folds if f.score >= best - AS_GOOD and f.score > 0.0]
    if not good:
        return None
    chosen = max(good, key=lambda found: found.fundamental)
    chosen = _finer_where_seen(ratio, u, usable, chosen)
    return replace(chosen, false_alarms=chosen.false_alarms * len(folds))


def _finer_where_seen(
    ratio: FloatArray, u: FloatArray, usable: BoolArray, chosen: Fold
) -> Fold:
    """The half or the third, as long as enough spots stand in between."""
    for _ in range(4):
        for divisor in (2, 3):
            finer = fold(ratio, u, usable, chosen.fundamental / divisor)
            between = finer.explained & ~chosen.explained
            if _real(ratio, u, usable & ~chosen.explained, between, finer):
                chosen = finer
                break
        else:
            return chosen
    return chosen


def _real(
    ratio: FloatArray, u: FloatArray, left: BoolArray, between: BoolArray, finer: Fold
) -> bool:
    """Whether spots in between are more, and tighter, than chance would have them."""
    hits = int(between.sum())
    if hits < FEWEST_IN_A_PLACE or finer.score <= 0.0:
        return False
    chance = np.minimum(1.0, 2.0 * GATE * u[left] / finer.fundamental)
    if poisson.sf(hits - 1, float(np.sum(chance))) > FALSE_ALARM:
        return False
    off = (ratio - finer.order * finer.fundamental)[between] / u[between]
    return bool(np.median(np.abs(off)) < 0.4 * GATE)
