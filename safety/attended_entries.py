"""What the people's ledger holds of attended permits and the powers read under them.

Pure, and loaded by the guard: the standard library is enough. ``people_ledger`` asks
these functions whether an entry may stand where it does.
"""

import math
from collections.abc import Mapping
from dataclasses import dataclass

from pitchsweep.safety.attended_permit import LONGEST_S, MAY_HOLD, POWER_CEILING_MW
from pitchsweep.safety.ledger_chain import Entry
from pitchsweep.safety.sign_off import utc_seconds

ATTENDED_BEGUN = "attended-begun"
POWER_READ = "power-read"
ATTENDED_ENDED = "attended-ended"
ENTRY_SLACK_S = 5.0
"""A permit's window may begin this much before its own entry was written."""


@dataclass(frozen=True)
class Attended:
    """An attended permit as the ledger has it; ``key`` is the holder's public one.

    ``ceiling_by`` is the officer who wrote a ceiling above 1 mW (else empty),
    ``ended`` says how it ended (empty while it lasts).
    """

    id: str
    bench: str
    unit: str
    simulated: bool
    holder: str
    role: str
    key: str
    lasers: tuple[str, ...]
    ceiling_mw: float
    ceiling_by: str
    valid_until: str
    ended: str = ""


@dataclass(frozen=True)
class PowerReading:
    """A power at the part, read under an attended permit; ``n`` and ``hash`` of it."""

    n: int
    hash: str
    utc: str
    attended: str
    bench: str
    simulated: bool
    laser: str
    wavelength_nm: float
    value_mw: float
    meter: str
    meter_due: str
    by: str
    key: str


def attended_begun(
    entry: Entry, *, key: str, roles: tuple[str, ...], officer: str
) -> Attended:
    """The permit that ``entry`` begins, signed with the holder's ``key`` (``roles``).

    ``officer`` is a safety officer who signs it too, or empty. ValueError says what
    the rules do not allow.
    """
    role, until = _text(entry, "role"), _text(entry, "valid_until")
    ceiling_mw = _number(entry, "ceiling_mw")
    if role not in roles or role not in MAY_HOLD:
        raise ValueError(
            f"gives an attended permit to somebody as {role}, who is enrolled as"
            f" {', '.join(roles)}; allowed {' or '.join(MAY_HOLD)}"
        )
    if ceiling_mw > POWER_CEILING_MW and not officer:
        raise ValueError(
            f"allows {ceiling_mw:g} mW without a safety officer's signature"
        )
    lasts_s = utc_seconds(until) - utc_seconds(entry.utc)
    if not 0.0 < lasts_s <= LONGEST_S + ENTRY_SLACK_S:
        raise ValueError(f"lasts {lasts_s:.0f} s, allowed up to {LONGEST_S:g} s")
    _text(entry, "eyewear")
    simulated = entry.data.get("simulated")
    if not isinstance(simulated, bool):
        raise ValueError("does not say whether the bench is simulated")
    return Attended(
        id=_text(entry, "id"),
        bench=_text(entry, "bench"),
        unit=_text(entry, "unit"),
        simulated=simulated,
        holder=_text(entry, "name"),
        role=role,
        key=key,
        lasers=_names(entry, "lasers"),
        ceiling_mw=ceiling_mw,
        ceiling_by=officer if ceiling_mw > POWER_CEILING_MW else "",
        valid_until=until,
    )


def power_read(entry: Entry, attended: Attended) -> PowerReading:
    """The reading in ``entry``, made under ``attended``; ValueError if it may not be.

    A value above what is allowed is kept: it is news, and nobody signs over it.
    """
    laser, value_mw = _text(entry, "laser"), _number(entry, "value_mw")
    if attended.ended:
        raise ValueError("reads a power under an attended permit that has ended")
    if utc_seconds(entry.utc) > utc_seconds(attended.valid_until):
        raise ValueError("reads a power after its attended permit's window")
    if laser not in attended.lasers:
        raise ValueError(f"reads laser '{laser}', which the permit does not name")
    if value_mw < 0.0:
        raise ValueError(f"reads {value_mw:g} mW")
    return PowerReading(
        n=entry.n,
        hash=entry.hash,
        utc=entry.utc,
        attended=attended.id,
        bench=attended.bench,
        simulated=attended.simulated,
        laser=laser,
        wavelength_nm=_number(entry, "wavelength_nm"),
        value_mw=value_mw,
        meter=_text(entry, "meter"),
        meter_due=_text(entry, "meter_due"),
        by=attended.holder,
        key=attended.key,
    )


def why_not_this_attended(
    found: Attended | None, values: Mapping[str, object]
) -> str | None:
    """None when the ledger has a permit that says what ``values`` say, and it lasts.

    ``values``: attribute of ``Attended`` -> what somebody claims of it.
    """
    if found is None:
        return "the people's ledger has no such attended permit"
    if found.ended:
        return f"the attended permit has ended: {found.ended}"
    for name, claimed in values.items():
        if getattr(found, name) != claimed:
            return (
                f"the people's ledger says {name.replace('_', ' ')}"
                f" {getattr(found, name)} of it, not {claimed}"
            )
    return None


def _text(entry: Entry, name: str) -> str:
    value = entry.data.get(name)
    if not isinstance(value, str) or not value.strip():
        raise ValueError(f"lacks its {name}")
    return value


def _number(entry: Entry, name: str) -> float:
    value = entry.data.get(name)
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise ValueError(f"lacks its {name}")
    if not math.isfinite(value):
        raise ValueError(f"has no finite {name}")
    return float(value)


def _names(entry: Entry, name: str) -> tuple[str, ...]:
    value = entry.data.get(name)
    if not isinstance(value, list) or not all(isinstance(v, str) for v in value):
        raise ValueError(f"lacks its {name}")
    return tuple(str(v) for v in value)
