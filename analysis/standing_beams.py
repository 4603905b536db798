"""Beams that stand still while the part turns: none of them is an order (pure).

Whatever its order, a beam leaves at the angle a + b to the beam, and
d(a + b)/da = 1 + cos a / cos b is never less than 1: as the part turns, every order of
it crosses the screen. A spot that is met at one place through most of a sweep comes
from something that does not turn.
"""

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.records import FloatArray, IntArray, OrderTable

STILL_MM = 1.5
_LEAST_ANGLES, _LEAST_SHARE = 5, 0.5
_LEAST_TURN_DEG = 5.0
_CELL_DEG = 0.5


def standing_spots(table: OrderTable) -> NDArray[np.bool_]:
    """Which spots (N,) belong to a beam that stands still.

    Within one mount and laser: spots within 1.5 mm of each other at half of the
    angles or more, at five angles at least and over five degrees at least.
    """
    out = np.zeros(len(table), dtype=np.bool_)
    run = np.zeros(len(table)) if table.run is None else table.run
    seats = np.stack([run, table.mount_deg, table.laser], axis=1)
    _, seat = np.unique(seats, axis=0, return_inverse=True)
    seat = seat.reshape(-1)
    turned = np.round((table.stage_deg - table.mount_deg) / _CELL_DEG).astype(np.int64)
    place = np.stack([table.x_mm, table.y_mm], axis=1)
    for one in range(int(seat.max(initial=-1)) + 1):
        rows = np.flatnonzero(seat == one)
        out[rows] = _standing(place[rows], turned[rows])
    return out


def _standing(place: FloatArray, turned: IntArray) -> NDArray[np.bool_]:
    """The same for the spots of one seat: places (n, 2), angles in cells (n,)."""
    out = np.zeros(len(place), dtype=np.bool_)
    enough = max(_LEAST_ANGLES, _LEAST_SHARE * len(np.unique(turned)))
    cell = np.round(place / STILL_MM).astype(np.int64)
    # One spot an angle and cell; a beam on a border has half of its spots in a cell.
    once = np.unique(np.column_stack([cell, turned]), axis=0)[:, :2]
    cells, count = np.unique(once, axis=0, return_counts=True)
    for column, row in cells[count >= enough / 4.0]:
        centre = STILL_MM * np.array([column, row], dtype=np.float64)
        for _ in range(3):
            near = np.hypot(*(place - centre).T) < STILL_MM
            if not near.any():
                break
            centre = np.median(place[near], axis=0)
        angles = np.unique(turned[near])
        if len(angles) >= enough and np.ptp(angles) * _CELL_DEG >= _LEAST_TURN_DEG:
            out |= near
    return out
