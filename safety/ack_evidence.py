"""What shows that a person stood at the bench after a trip. Pure.

Either the unit's reset input was pressed since, or the interlock was seen closed,
then open, then closed again; the opening that tripped the gate does not count.
After two channels contradicted each other only such a cycle of both counts. A name is
needed besides.
"""

from dataclasses import dataclass, replace

from pitchsweep.drivers.emission_client import UnitState

LONGEST_NAME = 100


@dataclass(frozen=True)
class Evidence:
    """What has been seen since the trip; ``resets`` is the count to beat."""

    resets: int | None = None
    was_reset: bool = False
    was_closed: bool = False
    was_opened: bool = False
    was_cycled: bool = False
    must_cycle: bool = False


def observe(evidence: Evidence, says: UnitState) -> Evidence:
    """``evidence`` with one more answer of the unit taken in.

    A count that fell (the unit was restarted) is a new beginning, not a press.
    """
    seen = evidence
    if seen.resets is None or says.reset_count < seen.resets:
        seen = replace(seen, resets=says.reset_count)
    elif says.reset_count > seen.resets:
        seen = replace(seen, was_reset=True)
    if says.interlock_open:
        return replace(seen, was_opened=seen.was_closed)
    if not says.interlock_closed:
        return seen
    return replace(seen, was_closed=True, was_cycled=seen.was_cycled or seen.was_opened)


def why_not_acknowledged(
    evidence: Evidence, says: UnitState | None, name: str
) -> str | None:
    """None when the trip may be acknowledged, otherwise what is still missing."""
    if says is None:
        return "the unit has not answered since the trip"
    if not name.strip() or len(name) > LONGEST_NAME or not name.isprintable():
        return (
            f"acknowledging needs a name (printable, up to {LONGEST_NAME} characters)"
        )
    if not says.interlock_closed:
        return "the interlock is open"
    if says.light_on:
        return "the unit still shows light"
    if evidence.must_cycle and not evidence.was_cycled:
        return (
            "the interlock channels contradicted each other: open and close it once, so"
            " that both are seen to follow"
        )
    if not (evidence.was_reset or evidence.was_cycled):
        return (
            "press the reset input, or open and close the interlock once, at the bench"
        )
    return None


def evidence_in_words(evidence: Evidence) -> str:
    """How the person showed that they stood there."""
    by_reset = evidence.was_reset and not evidence.must_cycle
    return "reset input" if by_reset else "interlock opened and closed"
