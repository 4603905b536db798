"""Orders of all spots without trust in the nominal pitch, or the reason why not."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.air_index import AirState
from pitchsweep.analysis.analysis_errors import (
    AmbiguousOrders,
    InputRefused,
    NoResult,
)
from pitchsweep.analysis.fit_problem import FitProblem, fit_problem, some_rows
from pitchsweep.analysis.fundamental_search import (
    FALSE_ALARM,
    Fold,
    fold,
    search_fundamental,
)
from pitchsweep.analysis.order_ambiguity import (
    DIVISORS,
    FEWEST_SITES,
    InBetween,
    SecondGrating,
    in_between,
    order_counts,
    second_grating,
)
from pitchsweep.analysis.order_tracking import MIRRORED, Assignment, mirrored
from pitchsweep.analysis.records import (
    UNKNOWN_ORDER,
    FloatArray,
    OrderTable,
    Rejection,
)
from pitchsweep.analysis.spot_directions import Directions, spot_directions
from pitchsweep.analysis.zero_track import GATE
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part

NOMINAL_RANGE = 1.25
"""A nominal pitch that counts is right within this factor; half and double are not."""
FEWEST_ZERO = 3
ZERO_SHARE = 0.3
CLEAR_RIVAL = 20.0
LEAST_SCORE = 0.3
APART = 4.0
"""Orders must stand further apart than this many u of where the zero order is."""
TWO_ZEROS = "two tracks could each be the zero order, so orders cannot be counted"
KNOW_THE_BENCH = (
    "measure screen distance and stage zero better (bench file), or give the nominal "
    "pitch or the orders"
)
GIVE_NOMINAL = "a nominal pitch right within 20 % (fit without --unknown-pitch) decides"


@dataclass(frozen=True)
class UnhintedOrders:
    """The pitch as found (nm), the problem counted from it, orders to start with."""

    pitch_nm: float
    problem: FitProblem
    first: Assignment
    warnings: tuple[str, ...]


def orders_without_hint(
    table: OrderTable,
    *,
    bench: Bench,
    parts: Sequence[Part],
    air: AirState,
    nominal_counts: bool,
) -> UnhintedOrders:
    """Orders of the first part's spots from their directions alone.

    ``nominal_counts``: a pitch within a quarter of the nominal needs no further
    proof against its half and its double. Raises InputRefused for a mirrored table;
    NoResult when the spots have no zero order or fold onto no fundamental;
    AmbiguousOrders when they could as well mean another, with what would decide.
    """
    problem = fit_problem(table, bench, parts, air)
    mine = _first_part(table)
    own = problem if mine.all() else some_rows(problem, mine)
    given = own.table.order != UNKNOWN_ORDER
    told = bool((given & (own.table.order != 0)).any())
    directions = spot_directions(own)
    if told:
        found, warnings = _fold_as_told(directions, own.table), []
    else:
        _require_zero(directions, own)
        found = _require_fold(directions)
        named = parts[0].nominal_pitch_nm if nominal_counts else None
        warnings = _doubts(directions, bench, found, parts[0], named)
    pitch_nm = parts[0].nominal_pitch_nm / found.fundamental
    known = parts[0].model_copy(update={"nominal_pitch_nm": pitch_nm})
    counted = fit_problem(table, bench, (known, *parts[1:]), air)
    first = _first_assignment(directions, found, mine)
    return UnhintedOrders(pitch_nm, counted, first, tuple(warnings))


def _first_part(table: OrderTable) -> NDArray[np.bool_]:
    if table.part is None:
        return np.ones(len(table), dtype=np.bool_)
    return np.asarray(table.part == 0)


def _fold_as_told(directions: Directions, table: OrderTable) -> Fold:
    """The fundamental that the given orders name."""
    told = (table.order != UNKNOWN_ORDER) & (table.order != 0)
    value = float(np.median(directions.ratio[told] / table.order[told]))
    if value <= 0.0:
        raise InputRefused(MIRRORED)
    return fold(directions.ratio, directions.u, directions.on_track, value)


def _require_zero(directions: Directions, own: FitProblem) -> None:
    expected = directions.zero_expected
    enough = max(FEWEST_ZERO, ZERO_SHARE * expected)
    if directions.zero_spots < enough:
        turned = spot_directions(_turned_over(own))
        if turned.zero_spots >= 2 * max(FEWEST_ZERO, directions.zero_spots):
            raise InputRefused(MIRRORED)
        raise NoResult(
            "no zero order among the spots (nothing moves as the law of reflection "
            "says), and without it directions are too uncertain to count orders from",
            remedy="sweep the angles at which the zero order crosses the screen, or "
            "give the nominal pitch or the orders",
        )
    if directions.rival_cost - directions.zero_cost < CLEAR_RIVAL:
        raise AmbiguousOrders(TWO_ZEROS, remedy=KNOW_THE_BENCH)


def _turned_over(own: FitProblem) -> FitProblem:
    return replace(own, table=mirrored(own.table))


def _require_fold(directions: Directions) -> Fold:
    usable = directions.on_track & ~directions.ghost & ~directions.is_zero
    found = search_fundamental(directions.ratio, directions.u, usable)
    if found is None or found.score < LEAST_SCORE or found.false_alarms > FALSE_ALARM:
        raise NoResult(
            f"the {int(usable.sum())} spots beside the zero order lie on multiples of "
            "no one fundamental: no pitch can be told without a nominal one",
            remedy="more angles, or less stray light; a nominal pitch right within "
            "20 % helps where orders are few",
        )
    return found


def _require_apart(directions: Directions, found: Fold) -> None:
    apart = found.fundamental * float(np.min(directions.step_size))
    if apart < APART * directions.zero_u:
        raise AmbiguousOrders(
            f"orders stand only {apart:.2g} apart in sin b, too close for what the "
            "bench file knows: any of them could be the zero order",
            remedy=KNOW_THE_BENCH,
        )


def _doubts(
    directions: Directions,
    bench: Bench,
    found: Fold,
    part: Part,
    nominal_nm: float | None,
) -> list[str]:
    """Warnings; raises NoResult where another reading is as good."""
    pitch_nm = part.nominal_pitch_nm / found.fundamental
    near = nominal_nm is not None and _within(pitch_nm, nominal_nm)
    warnings = []
    second = second_grating(directions, found)
    if second is not None:
        warnings.append(second_text(second, part, pitch_nm))
        if not near or _as_near(second, pitch_nm, part):
            raise AmbiguousOrders(
                f"{warnings[0]}; which one is the part's cannot be told",
                remedy="a nominal pitch within the part file's nominal_within_percent "
                "of one of them decides",
            )
    if not near:
        _require_first_order(directions, bench, found, pitch_nm)
    _require_apart(directions, found)
    if not near:
        warnings.append(_require_no_half(directions, bench, found, pitch_nm))
    return warnings


def _within(pitch_nm: float, nominal_nm: float) -> bool:
    return 1.0 / NOMINAL_RANGE < pitch_nm / nominal_nm < NOMINAL_RANGE


def _as_near(second: SecondGrating, pitch_nm: float, part: Part) -> bool:
    """Whether the nominal pitch may mean either grating."""
    nominal_nm = part.nominal_pitch_nm
    if abs(pitch_nm / nominal_nm - 1.0) <= part.nominal_within_percent / 100.0:
        return False
    return _within(nominal_nm / second.lowest_ratio, nominal_nm)


def second_text(second: SecondGrating, part: Part, pitch_nm: float) -> str:
    """The warning for a grating over the one of ``pitch_nm``."""
    other_nm = part.nominal_pitch_nm / second.lowest_ratio
    return (
        f"{second.spots} spots move as orders do but on no multiple of the grating of "
        f"{pitch_nm:.5g} nm: a second grating (about {other_nm:.4g} nm if its first "
        "order is among them) lies over it"
    )


def _require_first_order(
    directions: Directions, bench: Bench, found: Fold, pitch_nm: float
) -> None:
    first = order_counts(directions, bench, found, (-1, 1))
    if any(c.absent for c in first) and all(c.absent or not c.seen for c in first):
        seen = np.unique(found.order[found.explained])
        raise AmbiguousOrders(
            f"the spots fold onto a pitch of {pitch_nm:.5g} nm, but its orders +1 and "
            f"-1 are nowhere (seen: {', '.join(f'{m:+d}' for m in seen)}): it may as "
            "well be two gratings, one over the other",
            remedy=GIVE_NOMINAL,
        )


def _require_no_half(
    directions: Directions, bench: Bench, found: Fold, pitch_nm: float
) -> str:
    weakest: InBetween | None = None
    for divisor in DIVISORS:
        between = in_between(directions, bench, found, divisor)
        if not between.absence_decides:
            raise AmbiguousOrders(
                _half_text(between, pitch_nm, directions),
                remedy=f"{GIVE_NOMINAL}; so does a longer exposure that shows or "
                "excludes the orders in between",
            )
        if weakest is None or between.fainter < weakest.fainter:
            weakest = between
    assert weakest is not None
    return (
        f"orders were counted without the nominal pitch; a pitch of "
        f"{weakest.divisor * pitch_nm:.5g} nm would need its orders in between to be "
        f"{max(2.0, weakest.fainter):.0f} times fainter than their neighbours or more "
        f"({weakest.bright_sites} places show none)"
    )


def _half_text(between: InBetween, pitch_nm: float, directions: Directions) -> str:
    if directions.coarse.table.brightness is None:
        why = "the table says nothing about brightness (column brightness)"
    elif between.sites < FEWEST_SITES:
        why = f"too few places on the screen ({between.sites}) would have shown them"
    else:
        why = "going by their neighbours they might have been too faint to be seen"
    return (
        f"the pitch is {pitch_nm:.5g} nm or {between.divisor} times that: orders in "
        f"between are not seen, but {why}"
    )


def _first_assignment(
    directions: Directions, found: Fold, mine: NDArray[np.bool_]
) -> Assignment:
    order = np.zeros(mine.shape[0], dtype=np.int64)
    assigned = np.zeros(mine.shape[0], dtype=np.bool_)
    off: FloatArray = np.full(mine.shape[0], np.inf)
    order[mine] = found.order
    distance = (directions.ratio - found.order * found.fundamental) / directions.u
    off[mine] = distance**2
    assigned[mine] = directions.on_track & ~directions.ghost & (np.abs(distance) < GATE)
    reasons = {int(i): Rejection.NO_ORDER for i in np.flatnonzero(~assigned)}
    return Assignment(order, assigned, off, reasons)
