"""Beams that keep coming back and are no order are warned of; wild spots are not."""

import numpy as np
from order_tables import order_table_of

from pitchsweep.analysis.records import OrderTable, RejectedSpot, Rejection
from pitchsweep.analysis.unknown_beams import unknown_beam_warnings

STEPS = 60


def sweep() -> OrderTable:
    """One spot a step, a degree apart."""
    return order_table_of(
        [float(a) for a in range(STEPS)], [float(x) for x in range(STEPS)]
    )


def refused(step: int, x_mm: float, y_mm: float = 5.0) -> RejectedSpot:
    return RejectedSpot(step, x_mm, y_mm, "mm", Rejection.NO_ORDER)


def test_a_spot_that_stands_still_while_the_stage_turns_is_warned_of() -> None:
    (warning,) = unknown_beam_warnings(
        sweep(), [refused(k, 70.0 + 0.3 * (k % 3)) for k in range(0, 40, 2)]
    )
    assert "stands still at x 70" in warning and "20 of 60 steps" in warning


def test_a_spot_that_moves_against_the_part_is_warned_of() -> None:
    (warning,) = unknown_beam_warnings(
        sweep(), [refused(k, 90.0 - 1.5 * k) for k in range(10, 40)]
    )
    assert "moves over the screen by -1.5 mm a degree" in warning


def test_single_wild_spots_and_other_reasons_are_no_beam() -> None:
    rng = np.random.default_rng(0)
    wild = [
        refused(int(k), float(x), float(y))
        for k, x, y in zip(
            rng.permutation(STEPS)[:8],
            rng.uniform(-180, 180, 8),
            rng.uniform(-40, 40, 8),
            strict=True,
        )
    ]
    assert unknown_beam_warnings(sweep(), wild) == []
    hole = [
        RejectedSpot(k, 0.0, 0.0, "mm", Rejection.ON_HOLE) for k in range(0, STEPS, 2)
    ]
    assert unknown_beam_warnings(sweep(), hole) == []
    assert unknown_beam_warnings(sweep(), []) == []
