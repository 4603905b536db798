"""What could be meant instead: half the fundamental, a second grating, a lost order.

Every question is put to the places where orders would have stood on the screen, and
to the light they would have had there.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.stats import poisson

from pitchsweep.analysis.fundamental_search import Fold, dense_places
from pitchsweep.analysis.part_ray import Local, dot, trace_rays
from pitchsweep.analysis.records import FloatArray
from pitchsweep.analysis.spot_directions import GHOST_REACH, Directions
from pitchsweep.analysis.steps_taken import all_steps
from pitchsweep.analysis.zero_track import GATE
from pitchsweep.configs.bench_model import Bench

BoolArray = NDArray[np.bool_]

DIVISORS = (2, 3)
WELL_OFF_GRAZING = 0.2
"""Orders leaving closer to the surface than this cosine fade by themselves."""
FEWEST_SITES = 10
"""Absence at fewer places than this says nothing."""
CLEARLY_SEEN = 2.0
"""An order this much brighter than the faintest spot of all would have been seen."""
FEWEST_OF_A_TRACK = 6
FALSE_ALARM = 1e-4
LOCAL_WINDOWS = 10.0
SAME_WAY = 0.25


@dataclass(frozen=True)
class InBetween:
    """What is known of orders between those seen, for one divisor.

    ``sites`` places where they would have been on the screen; ``bright_sites`` those
    where they would have been clearly seen, going by their neighbours' light;
    ``fainter`` how many times fainter than expected they must be (median).
    """

    divisor: int
    sites: int
    bright_sites: int
    fainter: float

    @property
    def absence_decides(self) -> bool:
        return self.bright_sites >= FEWEST_SITES


def sites(directions: Directions, bench: Bench, multiples: FloatArray) -> BoolArray:
    """Which of ``multiples`` (M,) of nominal lambda/d each step shows: (S, M).

    On the screen, off the beam hole, and leaving well off grazing. Steps as in
    ``all_steps``, those without any spot too.
    """
    coarse, steps = directions.coarse, all_steps(directions)
    local, size = steps.local.copy(), steps.local[:, Local.Q].copy()
    hole = bench.screen.hole
    clear = hole.diameter_mm / 2.0 + bench.beam.diameter_mm + bench.screen.u_offset_mm
    shown = np.zeros((size.size, multiples.size), dtype=np.bool_)
    for column, multiple in enumerate(multiples):
        local[:, Local.Q] = multiple * size
        ray = trace_rays(local)
        x = dot(ray.hit, ray.axes[:, 0]) + local[:, Local.SCREEN_X]
        y = dot(ray.hit, ray.axes[:, 1]) + local[:, Local.SCREEN_Y]
        on = np.abs(x) < coarse.half_width_mm - bench.beam.diameter_mm
        on &= np.abs(y) < coarse.half_height_mm - bench.beam.diameter_mm
        on &= np.hypot(x - hole.x_mm, y - hole.y_mm) > clear
        shown[:, column] = on & ray.valid & (ray.kn2 > WELL_OFF_GRAZING**2)
    return shown


def _multiples_between(found: Fold, divisor: int) -> FloatArray:
    """The multiples of 1/divisor up to the highest order seen that are not whole."""
    highest = _highest(found) * divisor
    counts = np.arange(-highest, highest + 1)
    return np.asarray(counts[counts % divisor != 0] / divisor)


def in_between_sites(
    directions: Directions, bench: Bench, found: Fold, divisor: int
) -> int:
    """Places on the screen where orders between those of ``found`` would stand."""
    multiples = _multiples_between(found, divisor)
    return int(sites(directions, bench, multiples * found.fundamental).sum())


def _light(directions: Directions, found: Fold) -> FloatArray:
    """Brightness (S, 2h+1) of orders -h..h at every step, h the highest seen.

    Where an order is not seen its median stands, 0 where it never is.
    """
    coarse, highest = directions.coarse, _highest(found)
    light = np.zeros((coarse.n_steps, 2 * highest + 1))
    brightness = coarse.table.brightness
    assert brightness is not None
    seen = (found.explained | directions.is_zero) & ~directions.ghost
    seen &= np.abs(found.order) <= highest
    where = (coarse.step_group[seen], found.order[seen] + highest)
    np.maximum.at(light, where, brightness[seen])
    usual = np.array(
        [np.median(c[c > 0.0]) if (c > 0.0).any() else 0.0 for c in light.T]
    )
    light = np.where(light > 0.0, light, usual)
    empty = all_steps(directions).laser.size - coarse.n_steps
    return np.concatenate([light, np.tile(usual, (empty, 1))])


def _highest(found: Fold) -> int:
    return int(np.abs(found.order[found.explained]).max())


def in_between(
    directions: Directions, bench: Bench, found: Fold, divisor: int
) -> InBetween:
    """What the absence of the orders between those of ``found`` is worth."""
    multiples = _multiples_between(found, divisor)
    shown = sites(directions, bench, multiples * found.fundamental)
    if directions.coarse.table.brightness is None:
        return InBetween(divisor, int(shown.sum()), 0, 1.0)
    light, highest = _light(directions, found), _highest(found)
    below = light[:, np.floor(multiples).astype(np.int64) + highest]
    above = light[:, np.ceil(multiples).astype(np.int64) + highest]
    both = (below > 0.0) & (above > 0.0)
    expected = np.where(both, np.sqrt(below * above), np.maximum(below, above))
    times = expected / _faintest(directions)[:, None]
    bright = shown & (times > CLEARLY_SEEN)
    fainter = float(np.median(times[bright])) if bright.any() else 1.0
    return InBetween(divisor, int(shown.sum()), int(bright.sum()), fainter)


def _faintest(directions: Directions) -> FloatArray:
    """Brightness (S,) of the faintest spot that each step's laser shows."""
    table = directions.coarse.table
    assert table.brightness is not None
    lasers = range(len(table.laser_names))
    faintest = np.array(
        [np.min(table.brightness[table.laser == i], initial=np.inf) for i in lasers]
    )
    return np.asarray(faintest[all_steps(directions).laser])


@dataclass(frozen=True)
class OrderCount:
    """An order: at how many steps it would be on the screen, and at how many it is."""

    order: int
    sites: int
    seen: int

    @property
    def absent(self) -> bool:
        """Missing although the screen would have shown it often enough."""
        return self.sites >= FEWEST_SITES and self.seen < 0.1 * self.sites


def order_counts(
    directions: Directions, bench: Bench, found: Fold, orders: Sequence[int]
) -> tuple[OrderCount, ...]:
    """Sites and spots of some orders, none of them zero."""
    multiples = np.array(orders, dtype=np.float64) * found.fundamental
    shown = sites(directions, bench, multiples).sum(axis=0)
    return tuple(
        OrderCount(m, int(n), int(np.sum(found.explained & (found.order == m))))
        for m, n in zip(orders, shown, strict=True)
    )


@dataclass(frozen=True)
class SecondGrating:
    """Spots no multiple explains that move as an order does."""

    spots: int
    lowest_ratio: float


def second_grating(directions: Directions, found: Fold) -> SecondGrating | None:
    """Tracks among the unexplained spots, None if there are none.

    A copy that runs beside every order, the zero order too, is a ghost of a second
    surface and no grating.
    """
    ratio, u = directions.ratio, directions.u
    left = directions.on_track & ~directions.is_zero & ~found.explained
    left &= ~directions.ghost
    off = np.abs(ratio - found.order * found.fundamental) / u
    left &= off > 2.0 * GATE
    fewest = max(FEWEST_OF_A_TRACK, int(0.1 * directions.coarse.n_steps))
    tracks: list[float] = []
    spots = 0
    for place in dense_places(ratio[left], u[left]):
        width = GATE * float(np.median(u[left]))
        near = left & (np.abs(ratio - place.centre) < LOCAL_WINDOWS * width)
        members = left & (np.abs(ratio - place.centre) < width)
        chance = (near.sum() - members.sum()) / LOCAL_WINDOWS + 0.5
        few = members.sum() < fewest
        if few or poisson.sf(members.sum() - 1, chance) > FALSE_ALARM:
            continue
        if _runs_beside(directions, found, members):
            continue
        tracks.append(place.centre)
        spots += int(members.sum())
    if not tracks:
        return None
    return SecondGrating(spots, min(abs(centre) for centre in tracks))


def _runs_beside(directions: Directions, found: Fold, members: BoolArray) -> bool:
    """Whether most members keep one distance, in mm, from an order of their step."""
    coarse, table = directions.coarse, directions.coarse.table
    reach = GHOST_REACH * float(coarse.base[0, Local.DISTANCE])
    known = found.explained | directions.is_zero
    apart = []
    for row in np.flatnonzero(members):
        mates = np.flatnonzero(known & (coarse.step_group == coarse.step_group[row]))
        dx = table.x_mm[row] - table.x_mm[mates]
        dy = table.y_mm[row] - table.y_mm[mates]
        near = np.flatnonzero(np.hypot(dx, dy) < reach)
        if near.size:
            nearest = near[np.argmin(np.hypot(dx, dy)[near])]
            apart.append((dx[nearest], dy[nearest]))
    if len(apart) < 0.5 * members.sum():
        return False
    vectors = np.array(apart)
    middle = np.median(vectors, axis=0)
    away = np.hypot(*(vectors - middle).T)
    return bool(np.mean(away < SAME_WAY * np.hypot(*middle) + 0.5) > 0.7)
