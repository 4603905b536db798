"""The decision on a part in the words that terminal, pictures and reports share."""

from pitchsweep.analysis.number_text import percent
from pitchsweep.analysis.records import Decision, PitchResult

NO_DECISION = "no decision: no tolerance was given"
TOO_NEAR = "undecided: too near a limit for this uncertainty"
TOO_WIDE = "undecided: the uncertainty is too large for this tolerance"
"""No pitch at all could have been shown to conform."""
OUTCOMES = {"conforms": "conforms", "does-not-conform": "does not conform"}


def outcome_words(decision: Decision, expanded_nm: float) -> str:
    """The outcome; ``expanded_nm`` is the U with which it was reached."""
    if decision.outcome is None:
        return NO_DECISION
    if decision.outcome in OUTCOMES:
        return OUTCOMES[decision.outcome]
    lower, upper = decision.lower_nm, decision.upper_nm
    if lower is None or upper is None or 2.0 * expanded_nm <= upper - lower:
        return TOO_NEAR
    return TOO_WIDE


def decision_words(result: PitchResult) -> str:
    """The outcome with the probability that the part conforms."""
    words = outcome_words(result.decision, result.U_pitch_nm)
    probability = result.decision.conformance_probability
    if result.decision.outcome is None or probability is None:
        return words
    return f"{words} (probability {percent(probability)})"


def decision_mark(result: PitchResult) -> str:
    """The outcome as a sentence of its own."""
    words = outcome_words(result.decision, result.U_pitch_nm)
    return f"{words[0].upper()}{words[1:]}."
