"""Beams that no order explains and that keep coming back: a matter of safety (pure).

Every beam that leaves the part or anything near it crosses the room as the stage
turns. A spot seen at many steps that is no order is such a beam, met where nobody
expects one.
"""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.records import FloatArray, OrderTable, RejectedSpot, Rejection

UNEXPLAINED = (
    Rejection.NO_ORDER,
    Rejection.OFF_TRACK,
    Rejection.SECOND_BEST,
)
_LEAST_STEPS, _LEAST_SHARE = 5, 0.1
_MOST_STANDING = 3
_MOST_ASKED = 30.0
_AT_MOST = 600
_STILL_MM = 1.5
_STRAIGHT_MM = 6.0


def unknown_beam_warnings(
    table: OrderTable, rejected: Sequence[RejectedSpot]
) -> list[str]:
    """A warning for each kind of beam that keeps being seen and is no order.

    ``table`` tells the stage angle of each step; ``rejected`` spots in mm count where
    the reason is one of ``UNEXPLAINED``.
    """
    stage = {int(s): float(d) for s, d in zip(table.step, table.stage_deg, strict=True)}
    seen = np.array(
        [
            (r.step, stage[r.step], r.x, r.y)
            for r in rejected
            if r.unit == "mm" and r.reason in UNEXPLAINED and r.step in stage
        ],
        dtype=np.float64,
    ).reshape(-1, 4)
    seen = seen[:: 1 + len(seen) // _AT_MOST]
    enough = max(_LEAST_STEPS, min(_LEAST_SHARE * len(stage), _MOST_ASKED))
    warnings = []
    for _ in range(_MOST_STANDING):
        standing = _standing(seen, enough)
        if standing is None:
            break
        x_mm, y_mm, members = standing
        steps = len(np.unique(seen[members, 0]))
        warnings.append(
            f"an unknown beam stands still at x {x_mm:.0f}, y {y_mm:.0f} mm in "
            f"{steps} of {len(stage)} steps: a reflection that does not turn with the "
            "part; find where it comes from before the bench is left alone"
        )
        seen = seen[~members]
    # Wild single spots scatter; a beam follows a line.
    moving = _on_a_line(seen, enough)
    if moving is not None:
        rate, steps = moving
        warnings.append(
            f"an unknown beam moves over the screen by {rate:+.1f} mm a degree of the "
            f"stage, seen in {steps} of {len(stage)} steps: it is no order of the part;"
            " find where it comes from before the bench is left alone"
        )
    return warnings


def _standing(
    seen: FloatArray, enough: float
) -> tuple[float, float, NDArray[np.bool_]] | None:
    """The place where spots of most steps lie on each other while the stage turns."""
    if len(seen) < enough:
        return None
    x, y = seen[:, 2], seen[:, 3]
    near = np.hypot(x[:, None] - x, y[:, None] - y) < _STILL_MM
    members = near[int(np.argmax(near.sum(axis=1)))]
    steps, turned = np.unique(seen[members, 0]), float(np.ptp(seen[members, 1]))
    if len(steps) < enough or turned < 1.0:
        return None
    return float(x[members].mean()), float(y[members].mean()), members


def _on_a_line(seen: FloatArray, enough: float) -> tuple[float, int] | None:
    """mm a degree and number of steps of the straightest track through the spots."""
    if len(seen) < enough:
        return None
    stage, x = seen[:, 1], seen[:, 2]
    best: tuple[float, int] | None = None
    for k in range(len(seen)):
        turn = stage - stage[k]
        other = np.abs(turn) > 1.0
        if not other.any():
            continue
        rates = (x[other] - x[k]) / turn[other]
        for rate in np.quantile(rates, np.linspace(0.05, 0.95, 19)):
            close = (np.abs(x - x[k] - rate * turn) < _STRAIGHT_MM) & (
                np.abs(turn) < 20.0
            )
            steps = len(np.unique(seen[close, 0]))
            if np.ptp(turn[close]) < 1.0:
                continue
            if steps >= enough and (best is None or steps > best[1]):
                # The slope of all of them, not that of the pair which found them.
                best = float(np.polyfit(turn[close], x[close], 1)[0]), steps
    return best
