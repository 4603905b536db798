"""What is asked of a finished fit: what would help, and the pitch with inputs drawn."""

import math
from dataclasses import replace

import numpy as np

from pitchsweep.analysis.decision import decide
from pitchsweep.analysis.fit_scene import base_pitch_nm
from pitchsweep.analysis.monte_carlo import agrees, tolerance_of
from pitchsweep.analysis.records import MonteCarlo, PitchResult
from pitchsweep.analysis.redrawn_fit import Stated, redrawn_pitch
from pitchsweep.analysis.weak_directions import weak_directions
from pitchsweep.analysis.what_would_help import Sweep, what_would_help
from pitchsweep.configs.part_model import Tolerance


def advice(sweep: Sweep, result: PitchResult) -> tuple[str, ...]:
    """Sentences: what the pitch trades against, then what would help most."""
    extra = beside_the_fit(sweep, result)
    weak = weak_directions(sweep.problem, sweep.fit, result.pitch_nm, extra)
    return (*weak, *what_would_help(sweep, result.pitch_nm, extra))


def monte_carlo(
    sweep: Sweep,
    result: PitchResult,
    readings_dof: float,
    generator: np.random.Generator,
) -> MonteCarlo:
    """The result with all inputs drawn, and whether it bears the stated one out."""
    stated = Stated(
        base_nm=base_pitch_nm(sweep.problem.parts[0]),
        coverage=result.coverage,
        readings_dof=readings_dof,
        extra_nm=beside_the_fit(sweep, result),
    )
    drawn = redrawn_pitch(sweep.problem, sweep.order, sweep.fit, stated, generator)
    tolerance = tolerance_of(result.u_pitch_nm)
    low = result.pitch_nm - result.U_pitch_nm
    high = result.pitch_nm + result.U_pitch_nm
    return MonteCarlo(
        pitch_nm=drawn.mean,
        u_nm=drawn.u,
        low_nm=drawn.low,
        high_nm=drawn.high,
        draws=drawn.draws,
        lost=drawn.lost,
        tolerance_nm=tolerance,
        settled=drawn.settled,
        validated=agrees(drawn, low=low, high=high, tolerance=tolerance),
    )


def with_draws(
    result: PitchResult, drawn: MonteCarlo, tolerance: Tolerance | None
) -> PitchResult:
    """The result with its draws; where they do not bear U out, U is theirs.

    The pitch stays the fit's. U then reaches from it to the further end of the drawn
    interval, so that pitch +- U holds all of it, and k = U / u. ``tolerance`` is the
    part's, for the decision.
    """
    result = replace(result, monte_carlo=drawn)
    if drawn.validated:
        return result
    reach = max(result.pitch_nm - drawn.low_nm, drawn.high_nm - result.pitch_nm)
    wider = max(reach, result.U_pitch_nm)
    factor = max(reach / result.u_pitch_nm, result.k)
    return replace(
        result,
        U_pitch_nm=wider,
        k=factor,
        decision=decide(result.pitch_nm, result.u_pitch_nm, wider, tolerance),
        warnings=(*result.warnings, _not_borne_out(result, drawn, factor)),
    )


def _not_borne_out(result: PitchResult, drawn: MonteCarlo, factor: float) -> str:
    low = (drawn.low_nm - result.pitch_nm) / result.u_pitch_nm
    high = (drawn.high_nm - result.pitch_nm) / result.u_pitch_nm
    covered = f"{100.0 * result.coverage:g} % of the draws"
    ends = f"{covered} lie from {low:+.2f} to {high:+.2f} u"
    if not drawn.settled:
        ends = f"the draws ran out before they were settled ({ends} so far)"
    if factor > result.k:
        used = f"U is taken to the further end, k = {factor:.2f}"
    else:
        used = "U is the wider of both and stays"
    return (
        f"drawing all inputs does not bear k = {result.k:.2f} out at two digits of u: "
        f"{ends}; {used}"
    )


def beside_the_fit(sweep: Sweep, result: PitchResult) -> float:
    """The part of u (nm) that is in the budget but not in the fit's own variance."""
    fitted_2 = result.pitch_nm**2 * float(sweep.fit.covariance[0, 0])
    return math.sqrt(max(0.0, result.u_pitch_nm**2 - fitted_2))
