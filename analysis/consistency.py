"""The pitch that parts of a sweep see: what chi-squared cannot tell, differences can.

Each subset is solved for by one Gauss-Newton step from the common minimum, with all
priors. For nested data var(subset - whole) = var(subset) - var(whole).
"""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.joint_fit import JointFit, one_step
from pitchsweep.analysis.records import (
    BudgetLine,
    FloatArray,
    IntArray,
    OrderTable,
    PitchSeen,
)
from pitchsweep.analysis.stage_travel import came_from

LIMIT = 4.0
"""Deviation in its own u beyond which a subset is said to disagree."""


def subsets(
    table: OrderTable,
    order: IntArray,
    incidence_rad: FloatArray,
) -> Iterator[tuple[str, NDArray[np.bool_]]]:
    """Named parts of the sweep: orders (each with the zero order), sides, halves,
    mounts, faces, ways the stage came, lasers.
    """
    zero = order == 0
    present = [int(m) for m in np.unique(order) if m != 0]
    if len(present) > 1:
        for m in present:
            yield f"order {m:+d}", zero | (order == m)
    positive = incidence_rad > 0.0
    if positive.any() and (~positive).any():
        yield "incidence above zero", positive
        yield "incidence below zero", ~positive
    middle = np.median(table.step)
    early = table.step <= middle
    if early.any() and (~early).any():
        yield "first half of the steps", early
        yield "second half of the steps", ~early
    mounts = np.unique(table.mount_deg)
    if len(mounts) > 1:
        for mount in mounts:
            yield f"mount {mount:g} deg", table.mount_deg == mount
    if table.face_deg is not None and len(np.unique(table.face_deg)) > 1:
        for face in np.unique(table.face_deg):
            yield f"face {face:g} deg", table.face_deg == face
    run = table.run if table.run is not None else np.zeros(len(table), np.int64)
    side = came_from(table.step, table.stage_deg, run)
    if (side > 0.0).any() and (side < 0.0).any():
        yield "steps come to from below", side < 0.0
        yield "steps come to from above", side > 0.0
    if len(table.laser_names) > 1:
        for index, name in enumerate(table.laser_names):
            yield f"laser {name}", table.laser == index


def pitches_seen(
    problem: FitProblem, order: IntArray, fit: JointFit, pitch_nm: float
) -> tuple[PitchSeen, ...]:
    """The pitch of every subset that determines one."""
    incidence = fit.incidence_rad
    seen = []
    mine = np.ones(len(problem.table), dtype=np.bool_)
    if problem.table.part is not None:
        mine = problem.table.part == 0
    for name, part in subsets(problem.table.take(mine), order[mine], incidence[mine]):
        # The references stay whole: it is the part's own spots that are divided.
        use = fit.used.copy()
        use[mine] &= part
        if not (order[use & mine] != 0).any():
            continue
        try:
            weight = use.astype(np.float64)
            move, covariance = one_step(problem, order, fit.state, weight)
        except np.linalg.LinAlgError:
            continue
        variance, whole = float(covariance[0, 0]), float(fit.covariance[0, 0])
        if not np.isfinite(variance) or variance > 0.01**2:
            continue
        apart = max(variance - whole, 1e-6 * variance)
        seen.append(
            PitchSeen(
                subset=name,
                pitch_nm=pitch_nm * (1.0 + float(move[0])),
                u_nm=pitch_nm * float(np.sqrt(variance)),
                deviation_nm=pitch_nm * float(move[0]),
                u_deviation_nm=pitch_nm * float(np.sqrt(apart)),
                spots=int(use.sum()),
            )
        )
    return tuple(seen)


def _beyond(seen: tuple[PitchSeen, ...]) -> list[PitchSeen]:
    return [s for s in seen if abs(s.deviation_nm) > LIMIT * s.u_deviation_nm]


def disagreement_lines(seen: tuple[PitchSeen, ...]) -> list[BudgetLine]:
    """A budget line as large as the worst disagreement that chance does not explain.

    What makes parts of a sweep disagree moves the whole by an unknown share of it;
    the whole difference is taken as its standard uncertainty.
    """
    worst = max((abs(s.deviation_nm) for s in _beyond(seen)), default=0.0)
    if worst == 0.0:
        return []
    detail = "what makes parts of the sweep see different pitches is not known"
    return [BudgetLine("disagreement between parts of the sweep", "B", worst, detail)]


def disagreements(seen: tuple[PitchSeen, ...]) -> list[str]:
    """Warnings for subsets that disagree with the whole."""
    return [
        f"{s.subset} sees a pitch {s.deviation_nm:+.3g} nm from the whole, "
        f"{abs(s.deviation_nm) / s.u_deviation_nm:.1f} times what chance explains: "
        "something that the fit does not carry moves with it; u is enlarged by that"
        for s in _beyond(seen)
    ]
