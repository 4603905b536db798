"""From an order table to the pitch, its uncertainty and the decision."""

import math
from dataclasses import replace

import numpy as np

from pitchsweep.analysis.air_index import AirState
from pitchsweep.analysis.analysis_errors import (
    AmbiguousOrders,
    InputRefused,
    NoResult,
)
from pitchsweep.analysis.assumptions import assumed_absent
from pitchsweep.analysis.budget import READINGS, combined_u, fit_budget
from pitchsweep.analysis.clipping import overrun
from pitchsweep.analysis.consistency import (
    disagreement_lines,
    disagreements,
    pitches_seen,
)
from pitchsweep.analysis.decision import coverage_factor, decide, effective_dof
from pitchsweep.analysis.fit_doubts import (
    off_nominal,
    off_screen_warnings,
    plain_warnings,
)
from pitchsweep.analysis.fit_problem import FitProblem, fit_problem
from pitchsweep.analysis.fit_scene import REFERENCE_C, base_pitch_nm
from pitchsweep.analysis.fit_with_jumps import (
    FitWithJumps,
    fit_with_jumps,
    overlooked_lines,
)
from pitchsweep.analysis.joint_fit import JointFit
from pitchsweep.analysis.nuisances import fitted_nuisances
from pitchsweep.analysis.order_visibility import remedy_of_no_order, why_no_order
from pitchsweep.analysis.pitch_hint import fit_with_hint
from pitchsweep.analysis.prior_pulls import prior_warnings
from pitchsweep.analysis.readings_scatter import Scatter, with_honest_scatter
from pitchsweep.analysis.records import (
    OrderTable,
    PitchResult,
    RejectedSpot,
    Rejection,
)
from pitchsweep.analysis.screen_area import off_screen, on_hole
from pitchsweep.analysis.second_look import (
    advice,
    beside_the_fit,
    monte_carlo,
    with_draws,
)
from pitchsweep.analysis.shared_places import repeats_counted
from pitchsweep.analysis.standing_beams import standing_spots
from pitchsweep.analysis.unknown_beams import unknown_beam_warnings
from pitchsweep.analysis.wavelengths_found import wavelengths_found
from pitchsweep.analysis.weak_directions import weak_directions
from pitchsweep.analysis.what_would_help import Sweep
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part

WORST_RELATIVE_U = 0.1
"""A pitch known worse than this is no result."""


def measure_pitch(
    table: OrderTable,
    *,
    bench: Bench,
    part: Part,
    references: tuple[Part, ...] = (),
    coverage: float = 0.95,
    air: AirState | None = None,
    rejected: tuple[RejectedSpot, ...] = (),
    trust_nominal: bool = True,
    generator: np.random.Generator | None = None,
    advise: bool = True,
) -> PitchResult:
    """The pitch of ``part`` at 20 deg C that all spots of ``table`` give together.

    ``references`` are further parts swept on the same bench, index 1 and up in the
    table's ``part`` column; certified ones carry the wavelength. ``air`` is
    the mean state during the sweep (the bench file's if None);
    ``rejected`` lists candidates refused before. Orders are counted from the part's
    nominal pitch until the spots contradict it; ``trust_nominal`` False counts them
    without (then half and double are judged by the spots' light). ``generator``: draw
    all inputs with it too (JCGM 101), and take U from them where they do not bear it
    out; ``advise`` False leaves out what would help. Raises InputRefused for a mirrored
    or empty table or a laser the bench does not have; NoResult when the data do not
    determine a pitch, or several alike.
    """
    _check(table, bench)
    air = air or AirState(
        bench.air.temperature_C, bench.air.pressure_hPa, bench.air.humidity_percent
    )
    refused = list(rejected)
    table = _on_screen(table, bench, refused)
    if len(table) == 0:
        raise NoResult("no spot lies on the screen outside the beam hole")
    table = _within_the_part(table, bench, (part, *references), refused)
    everything = table
    table = _without_standing(table, refused)
    table = repeats_counted(table)
    problem = fit_problem(table, bench, (part, *references), air)
    try:
        # A trial state may overflow; the solver steps back from it, or gives up.
        with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
            hinted = fit_with_hint(
                problem, bench=bench, air=air, trust_nominal=trust_nominal
            )
            carried = fit_with_jumps(hinted.problem, hinted.clean, bench, air)
            clean = carried.clean
            problem, fit, scatter, warnings = with_honest_scatter(
                carried.problem, clean
            )
    except (np.linalg.LinAlgError, ArithmeticError):
        raise NoResult(
            "the spots do not determine the pitch at all",
            remedy="check the unit of x_mm and y_mm, the signs of orders and angles",
        ) from None
    except AmbiguousOrders:
        raise
    except NoResult as error:
        raise _with_reason(error, table, bench, part) from None
    for index, reason in sorted(clean.reasons.items()):
        refused.append(_rejected_row(table, index, reason))
    warnings = [*hinted.warnings, *carried.warnings, *warnings]
    warnings += off_nominal(problem, fit, part)
    warnings += prior_warnings(problem, fit)
    # What concerns people's eyes is said first.
    warnings = unknown_beam_warnings(everything, refused) + warnings
    warnings += off_screen_warnings(refused, table)
    result = _result(problem, carried, fit, scatter, coverage, warnings, refused)
    result = replace(
        result,
        assumed_absent=assumed_absent(bench, part),
        part=part.part,
        serial=part.serial,
    )
    sweep = Sweep(problem, clean.order, fit, bench, air)
    wavelengths = wavelengths_found(
        problem,
        fit,
        coverage=coverage,
        dof=scatter.dof,
        beside=beside_the_fit(sweep, result) / result.pitch_nm,
    )
    result = replace(result, wavelengths=wavelengths)
    if not advise:
        return result
    result = replace(result, advice=advice(sweep, result))
    if generator is None:
        return result
    drawn = monte_carlo(sweep, result, max(scatter.dof, 1.0), generator)
    return with_draws(result, drawn, part.tolerance)


def _check(table: OrderTable, bench: Bench) -> None:
    if len(table) == 0:
        raise InputRefused("the order table holds no spot")
    for name in table.laser_names:
        if name not in bench.lasers:
            known = ", ".join(sorted(bench.lasers))
            raise InputRefused(f"laser '{name}' is not on the bench; it has {known}")


def _with_reason(
    error: NoResult, table: OrderTable, bench: Bench, part: Part
) -> NoResult:
    """The refusal, with why no order could be there if that is the cause."""
    incidence = np.unique(bench.stage.direction * (table.stage_deg - table.mount_deg))
    for name in table.laser_names:
        reason = why_no_order(bench, part, name, incidence)
        if reason:
            remedy = remedy_of_no_order(bench, part, name)
            return NoResult(f"{error.reason}: {reason}", remedy=remedy)
    return error


def _on_screen(
    table: OrderTable, bench: Bench, refused: list[RejectedSpot]
) -> OrderTable:
    cut = on_hole(bench, table.x_mm, table.y_mm)
    off = off_screen(bench, table.x_mm, table.y_mm)
    for index in np.flatnonzero(cut):
        refused.append(_rejected_row(table, int(index), Rejection.ON_HOLE))
    for index in np.flatnonzero(off & ~cut):
        refused.append(_rejected_row(table, int(index), Rejection.OFF_SCREEN))
    return table.take(~(cut | off))


def _within_the_part(
    table: OrderTable,
    bench: Bench,
    parts: tuple[Part, ...],
    refused: list[RejectedSpot],
) -> OrderTable:
    cut = overrun(table, bench, parts)
    if cut.all():
        raise NoResult(
            "the beam overruns the part's clear_width_mm at every step",
            remedy="use a narrower beam, or check clear_width_mm and the beam's"
            " diameter_mm and u_offset_mm",
        )
    for index in np.flatnonzero(cut):
        refused.append(_rejected_row(table, int(index), Rejection.OVERRUN))
    return table.take(~cut)


def _without_standing(table: OrderTable, refused: list[RejectedSpot]) -> OrderTable:
    standing = standing_spots(table)
    if standing.all():
        raise NoResult(
            "every spot stands still while the stage says that it turns",
            remedy="does the part turn with the stage, and is it lit at all?",
        )
    for index in np.flatnonzero(standing):
        refused.append(_rejected_row(table, int(index), Rejection.NO_ORDER))
    return table.take(~standing)


def _rejected_row(table: OrderTable, index: int, reason: Rejection) -> RejectedSpot:
    return RejectedSpot(
        step=int(table.step[index]),
        x=float(table.x_mm[index]),
        y=float(table.y_mm[index]),
        unit="mm",
        reason=reason,
        detail=f"stage {table.stage_deg[index]:g} deg",
    )


def _result(
    problem: FitProblem,
    carried: FitWithJumps,
    fit: JointFit,
    scatter: Scatter,
    coverage: float,
    warnings: list[str],
    refused: list[RejectedSpot],
) -> PitchResult:
    part, clean = problem.parts[0], carried.clean
    pitch_nm = base_pitch_nm(part) * math.exp(fit.state.values[0])
    seen = pitches_seen(problem, clean.order, fit, pitch_nm)
    budget = fit_budget(problem, fit, pitch_nm) + disagreement_lines(seen)
    budget += overlooked_lines(carried, pitch_nm)
    u_nm = combined_u(budget)
    if not math.isfinite(u_nm) or u_nm > WORST_RELATIVE_U * pitch_nm:
        raise NoResult(
            f"the spots leave the pitch uncertain by {100.0 * u_nm / pitch_nm:.0f} %; "
            "more angles at which an order crosses the screen are needed",
            remedy="; ".join(weak_directions(problem, fit, pitch_nm)),
        )
    if not fit.converged:
        raise NoResult("the joint fit did not settle; check bench and part files")
    readings_u = next(line.u_nm for line in budget if line.source == READINGS)
    dof = effective_dof(
        [(readings_u, max(scatter.dof, 1.0)), (_other_u(u_nm, readings_u), math.inf)]
    )
    k = coverage_factor(coverage, dof)
    warnings = warnings + disagreements(seen) + plain_warnings(pitch_nm, u_nm, clean)
    used = clean.used
    table = replace(problem.table, order=clean.order).take(used)
    return PitchResult(
        pitch_nm=pitch_nm,
        u_pitch_nm=u_nm,
        U_pitch_nm=k * u_nm,
        k=k,
        coverage=coverage,
        dof=dof,
        pitch_at_C=REFERENCE_C,
        reduced_chi2=scatter.reduced_chi2,
        steps_used=len(np.unique(problem.step_group[used])),
        spots_used=int(used.sum()),
        orders_used=tuple(int(m) for m in np.unique(clean.order[used])),
        budget=tuple(budget),
        nuisance=fitted_nuisances(problem, fit),
        decision=decide(pitch_nm, u_nm, k * u_nm, part.tolerance),
        warnings=tuple(warnings),
        rejected=tuple(refused),
        pitches_seen=seen,
        table=table,
        incidence_deg=np.rad2deg(fit.incidence_rad[used]),
        fitted_x_mm=fit.x_mm[used],
        fitted_y_mm=fit.y_mm[used],
        residual_x=fit.residual[used, 0],
        residual_y=fit.residual[used, 1],
        jumps=carried.jumps,
    )


def _other_u(u_nm: float, readings_u_nm: float) -> float:
    return math.sqrt(max(0.0, u_nm**2 - readings_u_nm**2))
