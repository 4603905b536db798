"""From an order table to the pitch, its uncertainty and the decision."""

import math
from dataclasses import dataclass, replace

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
from pitchsweep.analysis.fit_problem import FitProblem, fit_problem
from pitchsweep.analysis.fit_scene import REFERENCE_C, base_pitch_nm
from pitchsweep.analysis.fit_with_jumps import (
    FitWithJumps,
    fit_with_jumps,
    overlooked_lines,
)
from pitchsweep.analysis.joint_fit import JointFit, solve_joint_fit
from pitchsweep.analysis.nuisances import fitted_nuisances
from pitchsweep.analysis.order_visibility import why_no_order
from pitchsweep.analysis.pitch_hint import fit_with_hint
from pitchsweep.analysis.prior_pulls import prior_warnings
from pitchsweep.analysis.records import (
    OrderTable,
    PitchResult,
    RejectedSpot,
    Rejection,
)
from pitchsweep.analysis.robust_fit import CleanFit, rescaled, residual_2
from pitchsweep.analysis.second_look import advice, monte_carlo, with_draws
from pitchsweep.analysis.shared_places import repeats_counted
from pitchsweep.analysis.unknown_beams import unknown_beam_warnings
from pitchsweep.analysis.weak_directions import weak_directions
from pitchsweep.analysis.what_would_help import Sweep
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part

WORST_RELATIVE_U = 0.1
"""A pitch known worse than this is no result."""
PERCENT_LEVEL = 2e-3


@dataclass(frozen=True)
class _Scatter:
    """How the readings scatter against what they state."""

    reduced_chi2: float
    dof: float


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
            problem, fit, scatter, warnings = _with_honest_scatter(
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
        raise NoResult(_with_reason(str(error), table, bench, part)) from None
    for index, reason in sorted(clean.reasons.items()):
        refused.append(_rejected_row(table, index, reason))
    warnings = [*hinted.warnings, *carried.warnings, *warnings]
    warnings += _off_nominal(problem, fit, part)
    warnings += prior_warnings(problem, fit)
    # What concerns people's eyes is said first.
    warnings = unknown_beam_warnings(table, refused) + warnings
    warnings += _off_screen(refused, table)
    result = _result(problem, carried, fit, scatter, coverage, warnings, refused)
    result = replace(result, assumed_absent=assumed_absent(bench, part))
    sweep = Sweep(problem, clean.order, fit, bench, air)
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


def _with_reason(text: str, table: OrderTable, bench: Bench, part: Part) -> str:
    """The refusal, with why no order could be there if that is the cause."""
    incidence = np.unique(bench.stage.direction * (table.stage_deg - table.mount_deg))
    for name in table.laser_names:
        reason = why_no_order(bench, part, name, incidence)
        if reason:
            return f"{text}: {reason}"
    return text


def _on_screen(
    table: OrderTable, bench: Bench, refused: list[RejectedSpot]
) -> OrderTable:
    hole, screen = bench.screen.hole, bench.screen
    radius = hole.diameter_mm / 2.0 + bench.beam.diameter_mm
    on_hole = np.hypot(table.x_mm - hole.x_mm, table.y_mm - hole.y_mm) < radius
    margin = 3.0 * screen.u_offset_mm
    off = (np.abs(table.x_mm) > screen.width_mm / 2.0 + margin) | (
        np.abs(table.y_mm) > screen.height_mm / 2.0 + margin
    )
    for index in np.flatnonzero(on_hole):
        refused.append(_rejected_row(table, int(index), Rejection.ON_HOLE))
    for index in np.flatnonzero(off & ~on_hole):
        refused.append(_rejected_row(table, int(index), Rejection.OFF_SCREEN))
    return table.take(~(on_hole | off))


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


def _rejected_row(table: OrderTable, index: int, reason: Rejection) -> RejectedSpot:
    return RejectedSpot(
        step=int(table.step[index]),
        x=float(table.x_mm[index]),
        y=float(table.y_mm[index]),
        unit="mm",
        reason=reason,
        detail=f"stage {table.stage_deg[index]:g} deg",
    )


def scatter_of(problem: FitProblem, clean: CleanFit, fit: JointFit) -> _Scatter:
    """Reduced chi-squared of the readings, with what the unknowns absorb taken off."""
    absorbed = 0.0
    for index, parameter in enumerate(problem.parameters):
        known = fit.covariance[index, index] / parameter.u_prior**2
        absorbed += 1.0 - min(1.0, float(known))
    pulls = fit.step_variance * (1.0 / problem.u_step_rad**2)
    absorbed += float(np.sum(1.0 - np.minimum(1.0, pulls)))
    dof = 2.0 * float(clean.used.sum()) - absorbed
    if dof < 0.5:
        return _Scatter(math.nan, 0.0)
    return _Scatter(float(np.sum(residual_2(fit)[clean.used])) / dof, dof)


def _with_honest_scatter(
    problem: FitProblem, clean: CleanFit
) -> tuple[FitProblem, JointFit, _Scatter, list[str]]:
    """Readings that scatter more than stated are taken at their scatter."""
    fit = clean.fit
    scatter = scatter_of(problem, clean, fit)
    warnings: list[str] = []
    if scatter.dof <= 0.0:
        return problem, fit, scatter, warnings
    excess = scatter.reduced_chi2 - 1.0
    if excess > 3.0 * math.sqrt(2.0 / scatter.dof):
        factor = math.sqrt(scatter.reduced_chi2)
        warnings.append(
            f"spots scatter {factor:.2f} times their stated uncertainty; the readings' "
            "share of the uncertainty is enlarged by that"
        )
        problem = rescaled(problem, factor)
        weight = clean.used.astype(np.float64)
        fit = solve_joint_fit(problem, clean.order, weight, fit.state)
    return problem, fit, scatter, warnings


def _result(
    problem: FitProblem,
    carried: FitWithJumps,
    fit: JointFit,
    scatter: _Scatter,
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
    warnings = warnings + disagreements(seen) + _plain_warnings(pitch_nm, u_nm, clean)
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


def _off_nominal(problem: FitProblem, fit: JointFit, part: Part) -> list[str]:
    pitch_nm = base_pitch_nm(problem.parts[0]) * math.exp(fit.state.values[0])
    off = 100.0 * abs(pitch_nm / part.nominal_pitch_nm - 1.0)
    if off <= part.nominal_within_percent:
        return []
    return [
        f"the pitch is {off:.2f} % from the nominal {part.nominal_pitch_nm:g} nm, "
        f"more than the part file's nominal_within_percent "
        f"({part.nominal_within_percent:g}): is it this part?"
    ]


def _off_screen(refused: list[RejectedSpot], table: OrderTable) -> list[str]:
    off = sum(r.reason is Rejection.OFF_SCREEN for r in refused)
    if off <= 0.2 * (off + len(table)):
        return []
    return [
        f"{off} of {off + len(table)} spots lie off the screen that the bench file "
        "describes: check the unit of x_mm and y_mm and whether they are swapped"
    ]


def _plain_warnings(pitch_nm: float, u_nm: float, clean: CleanFit) -> list[str]:
    warnings = []
    if u_nm > PERCENT_LEVEL * pitch_nm:
        warnings.append(
            f"percent-level result (standard uncertainty {100.0 * u_nm / pitch_nm:.2g} "
            "%): it rests on the screen distance in the bench file; a sweep of angles "
            "with the zero order in view measures the distance itself"
        )
    n_used, n_all = int(clean.used.sum()), clean.used.shape[0]
    if n_used < 0.8 * n_all:
        warnings.append(
            f"{n_all - n_used} of {n_all} spots on the screen were not used: look at "
            "the rejected spots for ghosts, second gratings or a wrong nominal pitch"
        )
    return warnings
