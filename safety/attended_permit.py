"""The attended permit: a person holds a key down and wears the eyewear. Pure.

For alignment, calibration and power readings only: at most an hour, dark two seconds
after the last key press, 1 mW at the part unless the officer wrote a higher ceiling.
It never becomes an unattended run: without a hand on the key there is no light.
Presses reach the guard from the controller and are as good as it.
"""

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import ClassVar

from pitchsweep.safety.json_fields import number, text

LONGEST_S = 3600.0
HOLD_S = 2.0
POWER_CEILING_MW = 1.0
HIGHEST_CEILING_MW = 500.0
MAY_HOLD = ("safety-officer", "technician")
"""Who may hold an attended permit: a witness may not."""


@dataclass(frozen=True)
class AttendedPermit:
    """Allows light while ``holder`` holds the key down, within UTC seconds.

    ``role`` is the role in which the holder acts, ``eyewear`` the answer given to the
    eyewear item, ``ceiling_by`` the officer who wrote a ceiling above 1 mW. ``key`` is
    set on a twin, which must then prove itself as for a rehearsal. ``identifier`` and
    ``people_ledger`` say where the holder's signature stands: the guard looks.
    """

    kind: ClassVar[str] = "attended"
    holder: str
    role: str
    eyewear: str
    valid_from_utc_s: float
    valid_until_utc_s: float
    power_ceiling_mw: float = POWER_CEILING_MW
    ceiling_by: str = ""
    identifier: str = ""
    people_ledger: str = ""
    key: bytes | None = field(default=None, repr=False)

    def __post_init__(self) -> None:
        for name in ("holder", "role", "eyewear"):
            if not str(getattr(self, name)).strip():
                raise ValueError(f"an attended permit needs its {name}")
        lasts_s = self.valid_until_utc_s - self.valid_from_utc_s
        if not math.isfinite(lasts_s) or not 0.0 < lasts_s <= LONGEST_S:
            raise ValueError(
                f"an attended permit of {lasts_s:g} s: allowed above 0 to {LONGEST_S:g}"
            )
        highest = HIGHEST_CEILING_MW if self.ceiling_by.strip() else POWER_CEILING_MW
        if not 0.0 < self.power_ceiling_mw <= highest:
            raise ValueError(
                f"power ceiling {self.power_ceiling_mw:g} mW: allowed above 0 to"
                f" {highest:g} (above {POWER_CEILING_MW:g} only by the safety officer)"
            )


def attended_as_mapping(permit: AttendedPermit) -> dict[str, object]:
    """The permit as JSON values; the key in hexadecimal."""
    key = None if permit.key is None else permit.key.hex()
    return {**vars(permit), "kind": permit.kind, "key": key}


def attended_from_mapping(values: Mapping[str, object]) -> AttendedPermit:
    """The permit in ``values``; ValueError names what is wrong."""
    key = values.get("key")
    return AttendedPermit(
        holder=text(values, "holder"),
        role=text(values, "role"),
        eyewear=text(values, "eyewear"),
        valid_from_utc_s=number(values, "valid_from_utc_s"),
        valid_until_utc_s=number(values, "valid_until_utc_s"),
        power_ceiling_mw=number(values, "power_ceiling_mw"),
        ceiling_by=_words(values, "ceiling_by"),
        identifier=_words(values, "identifier"),
        people_ledger=_words(values, "people_ledger"),
        key=bytes.fromhex(key) if isinstance(key, str) else None,
    )


def _words(values: Mapping[str, object], key: str) -> str:
    """Text that may be empty."""
    value = values.get(key)
    return value if isinstance(value, str) else ""


def why_hold_is_released(pressed_s: float, now_s: float) -> str | None:
    """None while the key was pressed within the last two seconds; NaN is released."""
    if 0.0 <= now_s - pressed_s <= HOLD_S:
        return None
    return f"no key press for more than {HOLD_S:g} s"
