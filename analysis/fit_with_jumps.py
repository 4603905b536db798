"""The clean fit, with an unknown for every wavelength jump that its spots show."""

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.air_index import AirState
from pitchsweep.analysis.analysis_errors import NoResult
from pitchsweep.analysis.fit_parameters import Source
from pitchsweep.analysis.fit_problem import FitProblem, fit_problem
from pitchsweep.analysis.fit_scene import WavelengthJump
from pitchsweep.analysis.joint_fit import solve_joint_fit
from pitchsweep.analysis.order_tracking import Assignment
from pitchsweep.analysis.records import BudgetLine, FloatArray, JumpSeen, Rejection
from pitchsweep.analysis.robust_fit import CleanFit, clean_fit, residual_2, softened
from pitchsweep.analysis.wavelength_jumps import JumpSearch, Suspect, View, likeliest
from pitchsweep.configs.bench_model import Bench

SHOWN = 16.0
"""Fall of chi-squared from which a jump is carried by the fit: four times its u."""
PAIR_SHOWN = 25.0
"""The same for a jump with one back: there are many more pairs of moments."""
MOST_JUMPS = 6
ONE_STEP_OFF = 9.0
"""Moments whose chi-squared is within this of the best may be the moment as well."""
LEFT_OUT_SHARE = 0.02
"""Spots thrown off their track by a jump: from this share on all are looked at."""
REFOUND_RANGE = 0.01
OVERLOOKED = "wavelength jumps too small to be seen"
UNCARRIED = "a jump of camera or stage that is seen and not carried"


@dataclass(frozen=True)
class FitWithJumps:
    """The fit and its problem, the jumps in it, and what must be told of them.

    ``overlooked_u``: relative standard uncertainty of the pitch from jumps too small
    to be seen, of lasers that may jump; ``uncarried_u`` from a jump of something else.
    """

    problem: FitProblem
    clean: CleanFit
    jumps: tuple[JumpSeen, ...] = ()
    warnings: tuple[str, ...] = ()
    overlooked_u: float = 0.0
    uncarried_u: float = 0.0


def fit_with_jumps(
    problem: FitProblem, clean: CleanFit, bench: Bench, air: AirState
) -> FitWithJumps:
    """``clean`` again with jumps in it where its residuals show any.

    The step before and after each jump, and those among which it may as well have
    been, are left out: nobody knows with which wavelength they were seen.
    """
    table = problem.table
    if not clean.fit.converged:
        return FitWithJumps(problem, clean)
    lasers = [bench.lasers[name] for name in table.laser_names]
    u = np.array([m.u_jump_pm * 1e-3 / m.vacuum_wavelength_nm for m in lasers])
    jumps: list[WavelengthJump] = []
    now, fit, warnings, other = problem, clean, list[str](), 0.0
    while True:
        suspect = _suspect(now, fit, u)
        if suspect is None or not _shown(suspect):
            break
        if suspect.rival:
            warnings.append(_other_jump(suspect, now))
            other = suspect.rival_shift
            break
        known = set(jumps) & set(suspect.jumps)
        if len(jumps) + len(suspect.jumps) > MOST_JUMPS or known:
            warnings.append("the laser wavelength jumps more often than can be carried")
            break
        with_more = _refitted(problem, fit, [*jumps, *suspect.jumps], bench, air)
        if with_more is None:
            break
        jumps += suspect.jumps
        now, fit = with_more
    if not jumps:
        unseen = _overlooked_u(problem, clean, bench, u)
        return FitWithJumps(problem, clean, (), tuple(warnings), unseen, other)
    placed = _placed(problem, fit, jumps, bench, air, u)
    if not placed:
        return FitWithJumps(problem, clean, (), tuple(warnings), 0.0, other)
    again = _refitted(problem, fit, [s.jumps[0] for s in placed], bench, air)
    now, fit = again or (now, fit)
    away = _in_doubt(now, placed)
    fit = _without(now, fit, away)
    seen = _seen(now, fit, placed)
    unseen = _overlooked_u(now, fit, bench, u)
    told = (*warnings, *_told(seen))
    return FitWithJumps(now, fit, seen, told, unseen, other)


def _shown(suspect: Suspect) -> bool:
    return suspect.gain >= (SHOWN if len(suspect.jumps) == 1 else PAIR_SHOWN)


def _suspect(problem: FitProblem, clean: CleanFit, u: FloatArray) -> Suspect | None:
    used = clean.used.astype(np.float64)
    found = likeliest(View(problem, clean.order, clean.fit, used, _scale_2(clean)), u)
    off = sum(why is Rejection.OFF_TRACK for why in clean.reasons.values())
    if off <= LEFT_OUT_SHARE * len(problem.table):
        return found
    # A large jump throws the spots on one side of it off their tracks.
    soft = softened(problem, clean)
    view = View(problem, clean.order, soft.fit, soft.weight, soft.scale_2)
    other = likeliest(view, u)
    if other is None or (found is not None and found.gain >= other.gain):
        return found
    return other


def _overlooked_u(
    problem: FitProblem, clean: CleanFit, bench: Bench, u: FloatArray
) -> float:
    """A jump that would not be shown, anywhere in a run, with equal chance."""
    used = clean.used.astype(np.float64)
    view = View(problem, clean.order, clean.fit, used, _scale_2(clean))
    search, total = JumpSearch(view), 0.0
    for laser, name in enumerate(problem.table.laser_names):
        if not bench.lasers[name].may_jump:
            continue
        for run in np.unique(problem.run).tolist():
            scan = search.wavelength(laser, run, float(u[laser]))
            if scan is not None:
                sigmas = math.sqrt(SHOWN)
                total += scan.overlooked(float(u[laser]), sigmas) ** 2
    return math.sqrt(total)


def overlooked_lines(carried: FitWithJumps, pitch_nm: float) -> list[BudgetLine]:
    """Budget lines for jumps that the fit does not carry; none where there are none."""
    return [
        BudgetLine(source, "B", pitch_nm * u, detail)
        for source, u, detail in (
            (
                OVERLOOKED,
                carried.overlooked_u,
                "a mode hop anywhere in the run, as large as the spots would not show",
            ),
            (
                UNCARRIED,
                carried.uncarried_u,
                "by how much it moves the pitch, if it is what it looks like",
            ),
        )
        if u > 0.0
    ]


def _scale_2(clean: CleanFit) -> float:
    spread = residual_2(clean.fit)[clean.used]
    return max(1.0, float(np.median(spread)) / (2.0 * math.log(2.0)))


def _refitted(
    problem: FitProblem,
    clean: CleanFit,
    jumps: Sequence[WavelengthJump],
    bench: Bench,
    air: AirState,
) -> tuple[FitProblem, CleanFit] | None:
    """The fit with these jumps in it, all spots asked again; None if there is none."""
    ordered = sorted(jumps, key=lambda jump: (jump.run, jump.laser, jump.since))
    wider = fit_problem(problem.table, bench, problem.parts, air, ordered)
    on_orders = clean.used.copy()
    kept = dict(clean.reasons)
    for row, why in clean.reasons.items():
        if why is Rejection.OFF_TRACK:
            on_orders[row] = True
            del kept[row]
    first = Assignment(clean.order, on_orders, residual_2(clean.fit), kept)
    try:
        again = clean_fit(wider, REFOUND_RANGE, first)
    except (NoResult, np.linalg.LinAlgError):
        return None
    return (wider, again) if again.fit.converged else None


def _placed(
    problem: FitProblem,
    clean: CleanFit,
    jumps: Sequence[WavelengthJump],
    bench: Bench,
    air: AirState,
    u: FloatArray,
) -> list[Suspect]:
    """Each jump looked for once more with all others in the fit."""
    placed: list[Suspect] = []
    for number, jump in enumerate(jumps):
        others = [*jumps[:number], *jumps[number + 1 :]]
        again = _refitted(problem, clean, others, bench, air)
        suspect = None if again is None else _suspect(*again, u)
        if suspect is None:
            continue
        scan, found = suspect.scan, suspect.jumps[0]
        same = (found.laser, found.run) == (jump.laser, jump.run)
        if same and scan.gain[scan.best] >= SHOWN:
            moment = replace(jump, since=float(scan.since[scan.best]))
            gain = float(scan.gain[scan.best])
            if all(moment != other.jumps[0] for other in placed):
                placed.append(Suspect((moment,), scan, gain))
    return placed


def _in_doubt(problem: FitProblem, placed: Sequence[Suspect]) -> NDArray[np.bool_]:
    """Spots (N,) of steps of which nobody knows on which side of a jump they were."""
    doubtful = np.zeros(len(problem.table), dtype=np.bool_)
    for suspect in placed:
        scan, jump = suspect.scan, suspect.jumps[0]
        may_be = np.flatnonzero(scan.gain > suspect.gain - ONE_STEP_OFF)
        near = may_be[np.abs(may_be - scan.best) <= _reach(may_be, scan.best)]
        low = max(0, int(near.min()) - 1)
        high = int(near.max())
        same = (problem.table.laser == jump.laser) & (problem.run == jump.run)
        here = (problem.time >= scan.since[low]) & (problem.time <= scan.since[high])
        doubtful |= same & here
    return doubtful


def _reach(may_be: NDArray[np.intp], best: int) -> int:
    """How far the moments that may be it go on without a gap of more than two."""
    reach = 0
    for side in (may_be[may_be > best] - best, best - may_be[may_be < best][::-1]):
        last = 0
        for away in side.tolist():
            if away > last + 2:
                break
            last = away
        reach = max(reach, last)
    return reach


def _without(problem: FitProblem, clean: CleanFit, away: NDArray[np.bool_]) -> CleanFit:
    used = clean.used & ~away
    if not (clean.order[used] != 0).any():
        return clean
    reasons = dict(clean.reasons)
    for row in np.flatnonzero(clean.used & away).tolist():
        reasons[row] = Rejection.LASER_JUMP
    weight = used.astype(np.float64)
    fit = solve_joint_fit(problem, clean.order, weight, clean.fit.state)
    return CleanFit(fit, clean.order, used & fit.used, reasons)


def _seen(
    problem: FitProblem, clean: CleanFit, placed: Sequence[Suspect]
) -> tuple[JumpSeen, ...]:
    rows = [i for i, p in enumerate(problem.parameters) if p.source is Source.JUMP]
    gains = {suspect.jumps[0]: suspect.gain for suspect in placed}
    seen = []
    for row, jump in zip(rows, problem.jumps, strict=True):
        since = problem.time == jump.since
        scale = problem.parameters[row].shown_scale
        u = math.sqrt(float(clean.fit.covariance[row, row]))
        seen.append(
            JumpSeen(
                laser=problem.table.laser_names[jump.laser],
                run=jump.run,
                step=int(problem.table.step[since & (problem.run == jump.run)].min()),
                size_pm=scale * float(clean.fit.state.values[row]),
                u_pm=scale * u,
                gain=gains.get(jump, 0.0),
            )
        )
    return tuple(seen)


def _told(seen: Sequence[JumpSeen]) -> list[str]:
    if not seen:
        return []
    jumps = ", ".join(
        f"{j.size_pm:+.0f} pm (u {j.u_pm:.0f} pm) of {j.laser} at step {j.step}"
        for j in seen
    )
    return [
        f"the laser wavelength jumped: {jumps}; the fit carries it, and takes the "
        "stated wavelength to hold before the first jump"
    ]


def _other_jump(suspect: Suspect, problem: FitProblem) -> str:
    at = problem.time == suspect.jumps[0].since
    step = int(problem.table.step[at].min())
    return (
        f"near step {step} the spots move as if {suspect.rival}; the fit carries no "
        "such jump: look at camera, screen and stage"
    )
