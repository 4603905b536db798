"""How far the nominal pitch is followed: by default, until the spots contradict it."""

from dataclasses import dataclass
from functools import reduce
from math import gcd

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.air_index import AirState
from pitchsweep.analysis.analysis_errors import AmbiguousOrders, NoResult
from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.fundamental_search import fold
from pitchsweep.analysis.order_ambiguity import (
    FEWEST_SITES,
    in_between_sites,
    second_grating,
)
from pitchsweep.analysis.records import UNKNOWN_ORDER, OrderTable, Rejection
from pitchsweep.analysis.robust_fit import CleanFit, clean_fit
from pitchsweep.analysis.spot_directions import (
    Directions,
    ghost_suspects,
    spot_directions,
)
from pitchsweep.analysis.unhinted_orders import (
    LEAST_SCORE,
    UnhintedOrders,
    orders_without_hint,
    second_text,
)
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part

MOST_UNEXPLAINED = 0.2
"""Beyond this share of spots without an order the nominal pitch is doubted."""
MOST_LEFT_ELSEWHERE = 0.5
"""A pitch not near the nominal one that leaves more than this share is none: with stray
beams and ghosts some pitch always explains a few."""
WORTH_A_LOOK = 0.05
FOUND_RANGE = 0.01
"""Relative range of a pitch found from directions; its own u is far smaller."""
LEAST_KEPT = 0.6
"""A joint fit that keeps less than this share of the spots on orders keeps to a few."""
NOT_AN_ORDER = (Rejection.NO_ORDER, Rejection.TWO_ORDERS, Rejection.OFF_TRACK)


@dataclass(frozen=True)
class HintedFit:
    """The clean fit, the problem it is of, and what must be told about its orders."""

    problem: FitProblem
    clean: CleanFit
    warnings: tuple[str, ...] = ()


def fit_with_hint(
    problem: FitProblem,
    *,
    bench: Bench,
    air: AirState,
    trust_nominal: bool,
) -> HintedFit:
    """The clean joint fit with orders from the nominal pitch or without it.

    The nominal pitch is dropped where ``trust_nominal`` is False, and where a fit from
    it does not settle on a pitch near it, or leaves more than MOST_UNEXPLAINED of the
    spots unexplained, and a pitch found without it explains more. A certified pitch is
    always followed. Raises InputRefused and NoResult as ``clean_fit`` and
    ``orders_without_hint`` do, and AmbiguousOrders where all orders are multiples of
    one that is not seen.
    """
    part = problem.parts[0]
    if part.certified is not None:
        return HintedFit(problem, clean_fit(problem, _range_of(part)))
    if not trust_nominal:
        return _elsewhere(problem, bench, air, nominal_counts=False)
    try:
        clean = clean_fit(problem, _range_of(part))
    except NoResult as first:
        return _rescued(problem, bench, air, first)
    unexplained = _unexplained(problem, clean)
    settled = clean.fit.converged and _within_range(problem, clean)
    if unexplained > MOST_UNEXPLAINED or not settled:
        return _better_of(problem, clean, bench, air)
    return HintedFit(problem, clean, _second_look(problem, clean, bench, unexplained))


def _range_of(part: Part) -> float:
    return part.nominal_within_percent / 100.0


def _found(
    problem: FitProblem, bench: Bench, air: AirState, *, nominal_counts: bool
) -> UnhintedOrders:
    return orders_without_hint(
        problem.table,
        bench=bench,
        parts=problem.parts,
        air=air,
        nominal_counts=nominal_counts,
    )


def _refitted(found: UnhintedOrders) -> HintedFit:
    clean = clean_fit(found.problem, FOUND_RANGE, found.first)
    on_orders = found.first.assigned & (found.first.order != 0)
    kept = int((clean.used & on_orders).sum())
    if kept < LEAST_KEPT * on_orders.sum():
        raise NoResult(
            f"only {kept} of the {int(on_orders.sum())} spots that lie on orders agree "
            "in the joint fit: too few to tell the wild ones",
            remedy="more angles at which an order crosses the screen",
        )
    return HintedFit(found.problem, clean, found.warnings)


def _elsewhere(
    problem: FitProblem, bench: Bench, air: AirState, *, nominal_counts: bool
) -> HintedFit:
    """The fit without the nominal pitch; NoResult where it explains too little."""
    other = _refitted(_found(problem, bench, air, nominal_counts=nominal_counts))
    left = _unexplained(other.problem, other.clean)
    pitch_nm, part = _pitch_nm(other.problem, other.clean), problem.parts[0]
    far = abs(pitch_nm / part.nominal_pitch_nm - 1.0) > _range_of(part)
    if far and left > MOST_LEFT_ELSEWHERE:
        raise NoResult(
            f"no pitch explains the spots: {pitch_nm:.5g} nm, the best, leaves "
            f"{100.0 * left:.0f} % of them without an order",
            remedy="look for stray beams and ghosts among the rejected spots; take "
            "more angles",
        )
    return other


def _rescued(
    problem: FitProblem, bench: Bench, air: AirState, first: NoResult
) -> HintedFit:
    """A fit without the nominal pitch where it led nowhere; else its refusal."""
    if _told(problem.table):
        raise first
    try:
        return _elsewhere(problem, bench, air, nominal_counts=True)
    except AmbiguousOrders:
        raise
    except NoResult:
        raise first from None


def _better_of(
    problem: FitProblem, clean: CleanFit, bench: Bench, air: AirState
) -> HintedFit:
    """The fit with the nominal pitch, or the one without if that explains more."""
    if _told(problem.table):
        return HintedFit(problem, clean)
    if clean.fit.converged and _within_range(problem, clean):
        second = _second_grating(problem, clean)
        if second:
            return HintedFit(problem, clean, second)
    try:
        other = _elsewhere(problem, bench, air, nominal_counts=True)
    except NoResult as reason:
        if isinstance(reason, AmbiguousOrders) and not _explains(problem, clean):
            raise
        text = str(reason).splitlines()[0]
        return HintedFit(problem, clean, (f"without the nominal pitch: {text}",))
    if other.clean.used.sum() > clean.used.sum() or not clean.fit.converged:
        return other
    return HintedFit(problem, clean, other.warnings)


def _pitch_nm(problem: FitProblem, clean: CleanFit) -> float:
    nominal_nm = problem.parts[0].nominal_pitch_nm
    return float(nominal_nm * np.exp(clean.fit.state.values[0]))


def _within_range(problem: FitProblem, clean: CleanFit) -> bool:
    """Whether the fitted pitch is one that the part file allows."""
    off = float(np.exp(clean.fit.state.values[0])) - 1.0
    return abs(off) <= _range_of(problem.parts[0])


def _second_grating(problem: FitProblem, clean: CleanFit) -> tuple[str, ...]:
    """The warning for a grating over the fitted one, if the fitted one is there."""
    if len(problem.parts) > 1:
        return ()
    directions = spot_directions(problem)
    ratio = problem.parts[0].nominal_pitch_nm / _pitch_nm(problem, clean)
    seen = fold(directions.ratio, directions.u, _usable(directions), ratio)
    second = second_grating(directions, seen)
    if second is None or seen.score < LEAST_SCORE:
        return ()
    return (second_text(second, problem.parts[0], _pitch_nm(problem, clean)),)


def _usable(directions: Directions) -> NDArray[np.bool_]:
    return directions.on_track & ~directions.ghost & ~directions.is_zero


def _explains(problem: FitProblem, clean: CleanFit) -> bool:
    return clean.fit.converged and _unexplained(problem, clean) <= MOST_UNEXPLAINED


def _told(table: OrderTable) -> bool:
    """Whether the table itself names the orders."""
    return bool(((table.order != UNKNOWN_ORDER) & (table.order != 0)).any())


def _unexplained(problem: FitProblem, clean: CleanFit) -> float:
    """Share of the spots, ghosts aside, that belong to no order."""
    real = ~ghost_suspects(problem)
    without = [row for row, why in clean.reasons.items() if why in NOT_AN_ORDER]
    return float(real[without].sum()) / max(1, int(real.sum()))


def _second_look(
    problem: FitProblem, clean: CleanFit, bench: Bench, unexplained: float
) -> tuple[str, ...]:
    """Warnings on a fit that explains most spots; NoResult for a multiple."""
    if _told(problem.table):
        return ()
    orders = [abs(int(m)) for m in np.unique(clean.order[clean.used])]
    common = reduce(gcd, orders, 0)
    if common < 2 and unexplained < WORTH_A_LOOK:
        return ()
    if common > 1:
        _refuse_multiple(problem, clean, bench, common)
        return ()
    return _second_grating(problem, clean)


def _refuse_multiple(
    problem: FitProblem, clean: CleanFit, bench: Bench, common: int
) -> None:
    if len(problem.parts) > 1:
        return
    directions = spot_directions(problem)
    pitch_nm = _pitch_nm(problem, clean)
    ratio = common * problem.parts[0].nominal_pitch_nm / pitch_nm
    seen = fold(directions.ratio, directions.u, _usable(directions), ratio)
    if not seen.explained.any():
        return
    places = in_between_sites(directions, bench, seen, common)
    if places < FEWEST_SITES:
        return
    raise AmbiguousOrders(
        f"every order seen is a multiple of {common} if the pitch is {pitch_nm:.5g} nm,"
        f" and {places} places on the screen where the others belong show none: the "
        f"pitch may as well be {pitch_nm / common:.5g} nm",
        remedy="correct the nominal pitch, or fit with --unknown-pitch, which weighs "
        "the light; a longer exposure shows or excludes the orders in between",
    )
