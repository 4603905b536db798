"""Conformance with a tolerance: guarded acceptance, and how probable it is."""

import math

from scipy.special import ndtr, stdtrit

from pitchsweep.analysis.records import Decision
from pitchsweep.configs.part_model import Tolerance

CONFORMS = "conforms"
DOES_NOT_CONFORM = "does-not-conform"
UNDECIDED = "undecided"


def coverage_factor(coverage: float, dof: float) -> float:
    """Student's factor k for a two-sided coverage and effective degrees of freedom.

    ``dof`` may be infinite. JCGM 100 annex G (formula from memory).
    """
    return float(stdtrit(min(dof, 1e9), 0.5 + coverage / 2.0))


def decide(
    pitch_nm: float, u_nm: float, expanded_nm: float, tolerance: Tolerance | None
) -> Decision:
    """Guarded decision: the guard band is the expanded uncertainty on either side.

    Conforms when pitch +- U lies within the limits, does not conform when it lies
    wholly outside, else undecided (ISO 14253-1 style, JCGM 106; from secondary
    sources, see reference notes of the tests). The probability takes the pitch as
    normally distributed with u.
    """
    if tolerance is None:
        return Decision(None, "no tolerance given", None, None, None)
    lower, upper = tolerance.lower_nm, tolerance.upper_nm
    probability = float(
        ndtr((upper - pitch_nm) / u_nm) - ndtr((lower - pitch_nm) / u_nm)
    )
    rule = (
        "guarded acceptance: conforms if the pitch with its expanded uncertainty "
        f"lies within {lower:g} to {upper:g} nm; does not conform if it lies "
        "wholly outside; else undecided"
    )
    inside = lower + expanded_nm <= pitch_nm <= upper - expanded_nm
    outside = pitch_nm <= lower - expanded_nm or pitch_nm >= upper + expanded_nm
    if inside:
        outcome = CONFORMS
    elif outside:
        outcome = DOES_NOT_CONFORM
    else:
        outcome = UNDECIDED
    return Decision(outcome, rule, min(1.0, max(0.0, probability)), lower, upper)


def effective_dof(parts: list[tuple[float, float]]) -> float:
    """Welch-Satterthwaite: ``parts`` are (u, degrees of freedom), infinite allowed.

    JCGM 100 G.4; checked against its example H.1 in the tests.
    """
    total = sum(u * u for u, _ in parts)
    below = sum(u**4 / dof for u, dof in parts if math.isfinite(dof))
    return math.inf if below == 0.0 else total * total / below
