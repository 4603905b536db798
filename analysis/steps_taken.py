"""Every step of a sweep, also those at which no spot was seen.

A table holds spots, so a step that shows none is not in it. Where the numbers of the
steps have gaps and the angles do too, the angles in the gaps were swept.
"""

from dataclasses import dataclass

import numpy as np

from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.part_ray import Local
from pitchsweep.analysis.prediction import FitState, local_quantities
from pitchsweep.analysis.records import FloatArray, IntArray
from pitchsweep.analysis.spot_directions import Directions

WHOLE = 0.05
"""How far a gap may be from a whole number of steps."""


@dataclass(frozen=True)
class StepsTaken:
    """Geometry of the steps, those with spots first: ``local`` (S, N_LOCAL).

    Column Q holds the nominal lambda/d; ``laser`` (S,) as in the table.
    """

    local: FloatArray
    laser: IntArray


def all_steps(directions: Directions) -> StepsTaken:
    """The steps of the sweep at the geometry that the zero order tells."""
    coarse = directions.coarse
    rows = coarse.by_step[coarse.step_starts]
    state = FitState(directions.state.values, np.zeros(coarse.n_steps))
    order = np.zeros(len(coarse.table), dtype=np.int64)
    local = local_quantities(coarse, order, state)[rows]
    local[:, Local.Q] = coarse.base[rows, Local.Q]
    beside, turn = _empty_steps(coarse, rows)
    added = local[beside].copy()
    added[:, Local.INCIDENCE] += coarse.direction * np.deg2rad(turn)
    laser = coarse.table.laser[rows]
    return StepsTaken(
        np.concatenate([local, added]), np.concatenate([laser, laser[beside]])
    )


def _empty_steps(coarse: FitProblem, rows: IntArray) -> tuple[IntArray, FloatArray]:
    """Steps without spots: index (G,) of a step beside, and the turn from it, deg."""
    table = coarse.table
    numbers = np.unique(table.step)
    unaccounted = int(numbers[-1] - numbers[0] + 1) - numbers.size
    series = np.stack([table.laser[rows], np.round(table.mount_deg[rows] * 1e6)], 1)
    _, which = np.unique(series, axis=0, return_inverse=True)
    beside: list[int] = []
    turns: list[float] = []
    for one in np.unique(which):
        members = np.flatnonzero(which.reshape(-1) == one)
        for index, turn in _gaps(table.stage_deg[rows[members]]):
            beside.append(int(members[index]))
            turns.append(turn)
    if len(turns) > unaccounted:
        return np.zeros(0, dtype=np.int64), np.zeros(0)
    return np.array(beside, dtype=np.int64), np.array(turns, dtype=np.float64)


def _gaps(stage_deg: FloatArray) -> list[tuple[int, float]]:
    """Angles left out of an even series: index of the angle below, and how far on."""
    order = np.argsort(stage_deg, kind="stable")
    apart = np.diff(stage_deg[order])
    if apart.size < 3 or np.median(apart) <= 0.0:
        return []
    step = float(np.median(apart))
    found = []
    for place, gap in enumerate(apart / step):
        whole = round(float(gap))
        if whole >= 2 and abs(gap - whole) < WHOLE:
            found += [(int(order[place]), step * k) for k in range(1, whole)]
    return found
