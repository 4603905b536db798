"""A line of the gate's history, as guard, journal and report pass it on. Pure."""

from collections.abc import Mapping
from dataclasses import dataclass

from pitchsweep.safety.json_fields import number, text


@dataclass(frozen=True)
class GateEvent:
    """What happened to the gate and when.

    ``utc`` ISO 8601 text, ``monotonic_s`` of the guard's real clock, ``was`` and
    ``state`` the gate's words, ``event`` the table's word, ``reason`` in plain words.
    """

    utc: str
    monotonic_s: float
    was: str
    state: str
    event: str
    reason: str

    @property
    def moved(self) -> bool:
        """False for a refusal, which stays where it was."""
        return self.was != self.state


def event_from_mapping(values: Mapping[str, object]) -> GateEvent:
    """The event in ``values``; ValueError names the field that is wrong."""
    reason = values.get("reason")
    if not isinstance(reason, str):
        raise ValueError("reason: text is missing")
    return GateEvent(
        utc=text(values, "utc"),
        monotonic_s=number(values, "monotonic_s"),
        was=text(values, "was"),
        state=text(values, "state"),
        event=text(values, "event"),
        reason=reason,
    )
