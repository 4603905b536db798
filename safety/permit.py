"""Permits: what allows a run to ask for light, and the refusal of everything else.

Pure. A rehearsal is worth nothing except on a unit that answers a challenge with the
key made when this very twin was started; port names and addresses prove nothing. An
attended permit needs a hand on the key (``attended_permit``), an unattended one a
sign-off (``unattended_permit``). A guard without a permit never lights: it only takes
in that a trip is acknowledged.
"""

import hashlib
import hmac
import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import ClassVar

from pitchsweep.safety.attended_permit import (
    AttendedPermit,
    attended_as_mapping,
    attended_from_mapping,
)
from pitchsweep.safety.unattended_permit import (
    UnattendedPermit,
    unattended_as_mapping,
    unattended_from_mapping,
)

KEY_BYTES = 32
NONCE_BYTES = 16
KINDS = ("rehearsal", "attended", "unattended", "none")
CLOCK_BACK_LIMIT_S = 2.0
"""A clock set back by more than this counts as a lapse."""


@dataclass(frozen=True)
class RehearsalPermit:
    """Allows light on the twin whose key it carries, within a window of UTC seconds."""

    kind: ClassVar[str] = "rehearsal"
    key: bytes = field(repr=False)
    valid_from_utc_s: float
    valid_until_utc_s: float

    def __post_init__(self) -> None:
        if len(self.key) < KEY_BYTES:
            raise ValueError(f"a rehearsal key has at least {KEY_BYTES} bytes")
        window = (self.valid_from_utc_s, self.valid_until_utc_s)
        if not all(map(math.isfinite, window)) or window[0] >= window[1]:
            raise ValueError("a permit's window needs a finite start before its end")


@dataclass(frozen=True)
class NoPermit:
    """Allows nothing: for a guard that only acknowledges a trip."""

    kind: ClassVar[str] = "none"
    key: ClassVar[None] = None


Permit = RehearsalPermit | AttendedPermit | UnattendedPermit | NoPermit
"""The permits that exist so far."""


def permit_as_mapping(permit: Permit) -> dict[str, object]:
    """The permit as JSON values; the key travels in hexadecimal, over a pipe only."""
    if isinstance(permit, NoPermit):
        return {"kind": permit.kind}
    if isinstance(permit, AttendedPermit):
        return attended_as_mapping(permit)
    if isinstance(permit, UnattendedPermit):
        return unattended_as_mapping(permit)
    return {
        "kind": permit.kind,
        "key": permit.key.hex(),
        "valid_from_utc_s": permit.valid_from_utc_s,
        "valid_until_utc_s": permit.valid_until_utc_s,
    }


def permit_from_mapping(values: Mapping[str, object]) -> Permit:
    """The permit in ``values``; ValueError for any other kind, key or window."""
    kind = values.get("kind")
    if kind == NoPermit.kind:
        return NoPermit()
    if kind == AttendedPermit.kind:
        return attended_from_mapping(values)
    if kind == UnattendedPermit.kind:
        return unattended_from_mapping(values)
    if kind != RehearsalPermit.kind:
        raise ValueError(f"permit of kind {kind!r}: allowed {', '.join(KINDS)}")
    key = values.get("key")
    start, end = values.get("valid_from_utc_s"), values.get("valid_until_utc_s")
    if not isinstance(key, str):
        raise ValueError("a rehearsal permit carries its key in hexadecimal")
    if not isinstance(start, int | float) or not isinstance(end, int | float):
        raise ValueError("a permit needs valid_from_utc_s and valid_until_utc_s")
    return RehearsalPermit(bytes.fromhex(key), float(start), float(end))


def why_permit_lapsed(
    permit: Permit, *, utc_s: float, utc_by_monotonic_s: float
) -> str | None:
    """None while the permit is valid, otherwise the reason.

    ``utc_by_monotonic_s`` is the UTC at the guard's start plus monotonic seconds since,
    so that a clock set back does not lengthen a permit.
    """
    if isinstance(permit, NoPermit):
        return "this guard has no permit: it only acknowledges"
    back_s = utc_by_monotonic_s - utc_s
    if not back_s <= CLOCK_BACK_LIMIT_S:
        return f"the clock was set back by {back_s:.1f} s"
    latest = max(utc_s, utc_by_monotonic_s)
    if not permit.valid_from_utc_s <= min(utc_s, utc_by_monotonic_s):
        return "the permit's window has not begun (or the clock was set back)"
    if not latest < permit.valid_until_utc_s:
        return f"the permit ended {latest - permit.valid_until_utc_s:.1f} s ago"
    return None


def challenge_answer(key: bytes, nonce: bytes) -> bytes:
    """HMAC-SHA256 of the nonce: what only the twin that holds ``key`` can answer."""
    return hmac.new(key, nonce, hashlib.sha256).digest()


def answers_challenge(permit: Permit, nonce: bytes, answer: bytes) -> bool:
    """True when ``answer`` proves the key, compared in constant time."""
    if permit.key is None:
        return False
    return hmac.compare_digest(challenge_answer(permit.key, nonce), answer)


def power_ceiling_mw(permit: Permit, bench_ceiling_mw: float) -> float:
    """The lower of the bench's ceiling and the permit's own."""
    if isinstance(permit, AttendedPermit):
        return min(bench_ceiling_mw, permit.power_ceiling_mw)
    return bench_ceiling_mw
