"""What the controller may say to the guard: JSON lines to frozen values. Pure."""

import json
from collections.abc import Mapping
from dataclasses import dataclass
from enum import Enum

from pitchsweep.safety.guard_view import Beat
from pitchsweep.safety.json_fields import flag, number, text, whole

LONGEST_LINE = 1_000_000


class Request(Enum):
    """The commands of the controller."""

    TRIAL = "trial"
    PROOF = "proof"
    ARM = "arm"
    ACKNOWLEDGE = "ack"
    LIGHT = "light"
    DARK = "dark"
    BEAT = "beat"
    PRESS = "press"
    TRIP = "trip"
    STOP = "stop"
    DISARM = "disarm"


@dataclass(frozen=True)
class Command:
    """A request with its number (0: no reply wanted), a beat, and a name or reason.

    ``sent_s`` is when a key was pressed, in the guard's monotonic seconds.
    """

    request: Request
    number: int = 0
    beat: Beat | None = None
    words: str = ""
    sent_s: float = float("-inf")


def read_object(line: bytes) -> Mapping[str, object]:
    """The JSON object in ``line``; ValueError when it is something else."""
    if len(line) > LONGEST_LINE:
        raise ValueError(f"a line of {len(line)} bytes, allowed {LONGEST_LINE}")
    values = json.loads(line)
    if not isinstance(values, dict):
        raise ValueError("not a JSON object")
    return values


def read_command(line: bytes, received_s: float) -> Command:
    """The command in ``line``, received at ``received_s`` of the monotonic clock.

    ValueError says what is wrong with it. A message that claims to come from the
    future counts as sent when received; one that waited in the pipe keeps its age.
    """
    values = read_object(line)
    request = Request(text(values, "command"))
    asked = whole(values, "id") if "id" in values else 0
    if request is Request.ACKNOWLEDGE:
        return Command(request, asked, words=text(values, "name"))
    if request is Request.TRIP:
        return Command(request, asked, words=text(values, "reason"))
    if request in (Request.LIGHT, Request.BEAT):
        return Command(request, asked, beat=_beat(values, request, received_s))
    if request is Request.PRESS:
        return Command(request, asked, sent_s=min(received_s, number(values, "sent_s")))
    return Command(request, asked)


def _beat(values: Mapping[str, object], request: Request, received_s: float) -> Beat:
    sent_s = min(received_s, number(values, "sent_s"))
    if request is Request.BEAT and values.get("step") is None:
        return Beat(sent_s=sent_s)
    return Beat(
        sent_s=sent_s,
        step=whole(values, "step"),
        commanded_deg=number(values, "commanded_deg"),
        readback_deg=number(values, "readback_deg"),
        read_at_s=sent_s - number(values, "read_age_s"),
        turning=flag(values, "turning"),
        power_mw=number(values, "power_mw"),
        power_at_s=sent_s - number(values, "power_age_s"),
    )
