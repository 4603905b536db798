"""The unattended permit: a sign-off carried to the guard, which proves it anew. Pure.

The controller has checked settings, people and ledger; the guard takes nobody's word
for the signatures, the window and the work (unit and angles) that were signed.
"""

import hashlib
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import ClassVar

from pitchsweep.safety.json_fields import text
from pitchsweep.safety.ledger_chain import canonical_json
from pitchsweep.safety.sign_off import SignOff, record_from, record_text

KEY_BYTES = 32


@dataclass(frozen=True)
class UnattendedPermit:
    """Allows light within a sign-off's window, for the work that was signed.

    ``people_ledger`` is the path of the ledger that has the sign-off. ``key`` is set on
    a twin, which must then prove itself as for a rehearsal; a sign-off made for a twin
    never goes without one.
    """

    kind: ClassVar[str] = "unattended"
    record: SignOff
    people_ledger: str
    key: bytes | None = field(default=None, repr=False)

    def __post_init__(self) -> None:
        if self.record.statement.simulated != (self.key is not None):
            raise ValueError("a twin's sign-off needs the twin's key, no other may")
        if self.key is not None and len(self.key) < KEY_BYTES:
            raise ValueError(f"a twin's key has at least {KEY_BYTES} bytes")

    @property
    def valid_from_utc_s(self) -> float:
        """Start of the window."""
        return self.record.statement.window_utc_s[0]

    @property
    def valid_until_utc_s(self) -> float:
        """End of the window."""
        return self.record.statement.window_utc_s[1]


def unattended_as_mapping(permit: UnattendedPermit) -> dict[str, object]:
    """The permit as JSON values; the key in hexadecimal."""
    return {
        "kind": permit.kind,
        "record": record_text(permit.record),
        "people_ledger": permit.people_ledger,
        "key": None if permit.key is None else permit.key.hex(),
    }


def unattended_from_mapping(values: Mapping[str, object]) -> UnattendedPermit:
    """The permit in ``values``; ValueError names what is wrong."""
    key = values.get("key")
    return UnattendedPermit(
        record=record_from(text(values, "record")),
        people_ledger=text(values, "people_ledger"),
        key=bytes.fromhex(key) if isinstance(key, str) else None,
    )


def work_sha256(
    *,
    identity: str,
    keep_alive_ms: int,
    has_shutter: bool,
    line: str,
    channels: int,
    angles_deg: Mapping[int, float],
    tolerance_deg: float,
    power_ceiling_mw: float,
) -> str:
    """64 digits over what the guard works from: the unit and which angles may be lit.

    The angles count as a set: in which order they are lit is not a matter of safety.
    """
    work = {
        "identity": identity,
        "keep_alive_ms": keep_alive_ms,
        "has_shutter": has_shutter,
        "line": line,
        "channels": channels,
        "angles_deg": sorted({round(float(a), 9) + 0.0 for a in angles_deg.values()}),
        "tolerance_deg": float(tolerance_deg),
        "power_ceiling_mw": float(power_ceiling_mw),
    }
    return hashlib.sha256(canonical_json(work)).hexdigest()
