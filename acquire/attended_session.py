"""One session under an attended permit: entered, lit while held, powers noted. Acts.

The holder's signature begins it in the people's ledger, each power read is signed by
them too, and its end is entered with the head of the guard's own ledger. A trip ends
the session: the next begins with its holder's name, and with the door opened and closed
in front of the guard, as acknowledging would.
"""

import sqlite3
import time
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from dataclasses import dataclass, field

from pitchsweep.acquire.attended_bench import AttendedRequest, Place, Say
from pitchsweep.acquire.stop_signals import StopSignals
from pitchsweep.configs.job_model import Job
from pitchsweep.drivers.driver_errors import DriverError
from pitchsweep.safety.attended_entries import (
    ATTENDED_BEGUN,
    ATTENDED_ENDED,
    POWER_READ,
)
from pitchsweep.safety.attended_permit import POWER_CEILING_MW, AttendedPermit
from pitchsweep.safety.ledger import utc_text, verify
from pitchsweep.safety.people_store import enter
from pitchsweep.safety.permit import Permit
from pitchsweep.safety.safety_errors import GateRefused, SafetyError
from pitchsweep.safety.safety_home import SafetyHome
from pitchsweep.safety.sign_off import utc_seconds
from pitchsweep.safety.sign_off_store import new_identifier
from pitchsweep.safety.signing import PrivateKey

LEAST_LIGHT_S = 1.0
"""Light that a laser must have been given before its power can be noted."""


@dataclass(frozen=True)
class Terms:
    """What the holder signs: who, as what, for how long, with what on the eyes.

    ``officer`` is the key of who wrote a ceiling above 1 mW, None where it is not.
    """

    job: Job
    places: tuple[Place, ...]
    holder: PrivateKey
    role: str
    eyewear: str
    minutes: float
    ceiling_mw: float = POWER_CEILING_MW
    officer: PrivateKey | None = None


def refuse_too_strong(places: tuple[Place, ...], ceiling_mw: float) -> None:
    """GateRefused where a laser may give more than the permit's ceiling."""
    strongest = max(places, key=lambda place: place.power_mw)
    if strongest.power_mw > ceiling_mw:
        raise GateRefused(
            f"laser '{strongest.laser}' may have {strongest.power_mw:g} mW at the part,"
            f" the attended permit ends at {ceiling_mw:g} mW",
            "a safety officer may write more: --ceiling-mw MW --ceiling-by OFFICER",
        )


@dataclass(frozen=True)
class Noted:
    """A power as it was read off; ``lit_s`` is how long there had been light."""

    laser: str
    value_mw: float
    meter: str
    meter_due: str
    lit_s: float


@dataclass
class AttendedSession:
    """A permit that has begun; ``noted`` grows with every power that is entered."""

    home: SafetyHome
    terms: Terms
    identifier: str
    valid_until: str
    began_utc_s: float
    noted: list[Noted] = field(default_factory=list)
    lit_s: float = 0.0
    ending: str = "done"
    head: str = ""

    @property
    def time_is_up(self) -> bool:
        """Whether the window has ended, or ends within a second."""
        return time.time() > utc_seconds(self.valid_until) - 1.0

    def request(self, stop: StopSignals, say: Say) -> AttendedRequest:
        """What the bench is opened for."""
        folder = self.home.attended(self.identifier)
        keys = [self.terms.holder, *filter(None, [self.terms.officer])]
        return AttendedRequest(
            job=self.terms.job,
            folder=folder,
            ledger=folder / "ledger.jsonl",
            name=f"attended-{self.identifier}",
            places=self.terms.places,
            permit_for=self._permit,
            watched={str(self.home.revoked(key.public)): "" for key in keys},
            stop=stop,
            say=say,
        )

    def note(self, noted: Noted) -> None:
        """Enters a power that was read, signed by the holder.

        Raises GateRefused before there was light, and (once it is entered) for a power
        above the permit's ceiling; LedgerBroken, OSError.
        """
        if not noted.lit_s >= LEAST_LIGHT_S:
            raise GateRefused(
                f"no power noted: laser '{noted.laser}' had light for"
                f" {noted.lit_s:.1f} s",
                f"hold the key for at least {LEAST_LIGHT_S:g} s and read the meter",
            )
        laser = self.terms.job.bench.lasers[noted.laser]
        data = {
            **vars(noted),
            "lit_s": round(noted.lit_s, 2),
            "attended": self.identifier,
            "wavelength_nm": laser.vacuum_wavelength_nm,
        }
        enter(self.home, POWER_READ, data, [self.terms.holder])
        self.noted.append(noted)
        if noted.value_mw > self.terms.ceiling_mw:
            raise GateRefused(
                f"laser '{noted.laser}' gives {noted.value_mw:g} mW at the part, the"
                f" attended permit ends at {self.terms.ceiling_mw:g} mW",
                "the reading is entered; attenuate it, or ask the safety officer",
            )

    def _permit(self, key: bytes | None) -> Permit:
        terms = self.terms
        above = terms.officer is not None and terms.ceiling_mw > POWER_CEILING_MW
        return AttendedPermit(
            holder=terms.holder.name,
            role=terms.role,
            eyewear=terms.eyewear,
            valid_from_utc_s=self.began_utc_s,
            valid_until_utc_s=utc_seconds(self.valid_until),
            power_ceiling_mw=terms.ceiling_mw,
            ceiling_by=terms.officer.name if above and terms.officer else "",
            identifier=self.identifier,
            people_ledger=str(self.home.ledger),
            key=key,
        )


@contextmanager
def attended_session(home: SafetyHome, terms: Terms) -> Iterator[AttendedSession]:
    """A permit begun and, however the block ends, ended in the people's ledger.

    Raises LedgerBroken where the rules do not allow it, RecordForged, OSError.
    """
    now = utc_seconds(utc_text(time.time()))
    session = AttendedSession(
        home=home,
        terms=terms,
        identifier=new_identifier(),
        valid_until=utc_text(now + 60.0 * terms.minutes),
        began_utc_s=now,
    )
    _begin(session)
    try:
        yield session
    except BaseException as error:
        session.ending = _in_words(error)
        raise
    finally:
        _end(session)


def _begin(session: AttendedSession) -> None:
    terms, bench = session.terms, session.terms.job.bench
    keys = {terms.holder.public: terms.holder}
    if terms.officer is not None:
        keys.setdefault(terms.officer.public, terms.officer)
    data: dict[str, object] = {
        "id": session.identifier,
        "name": terms.holder.name,
        "role": terms.role,
        "bench": bench.bench,
        "unit": bench.emission.unit_identity,
        "simulated": bench.twin is not None,
        "job": terms.job.job,
        "lasers": sorted({place.laser for place in terms.places}),
        "eyewear": terms.eyewear,
        "ceiling_mw": float(terms.ceiling_mw),
        "valid_until": session.valid_until,
    }
    enter(session.home, ATTENDED_BEGUN, data, list(keys.values()))


def _end(session: AttendedSession) -> None:
    # Whatever ended it is the news, not that its end could not be noted.
    with suppress(SafetyError, OSError, sqlite3.Error):
        found = verify(session.home.attended(session.identifier) / "ledger.jsonl")
        data = {
            "id": session.identifier,
            "ending": session.ending,
            "lit_s": round(session.lit_s, 2),
            "entries": found.count,
            "head": found.head,
        }
        session.head = enter(session.home, ATTENDED_ENDED, data).hash


def _in_words(error: BaseException) -> str:
    if isinstance(error, SafetyError | DriverError):
        return str(error).splitlines()[0][:300]
    if isinstance(error, KeyboardInterrupt):
        return f"stopped: {error}"
    return type(error).__name__
