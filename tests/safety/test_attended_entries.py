"""Attended permits and power readings in the ledger; what an unattended run needs."""

import time
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from guard_builders import KEY, guard_config
from sign_off_builders import (
    OFFICER,
    TECHNICIAN,
    WITNESS,
    Office,
    attended_begun,
    changed,
    demo_work,
    good_answers,
    office,
    power_read,
    signed,
    stated,
    verdict,
    with_powers,
)

from pitchsweep.safety.attended_entries import (
    ATTENDED_BEGUN,
    ATTENDED_ENDED,
    POWER_READ,
)
from pitchsweep.safety.attended_permit import AttendedPermit
from pitchsweep.safety.ledger import utc_text
from pitchsweep.safety.people_store import enter, read_people
from pitchsweep.safety.permit_proof import why_permit_is_unproven
from pitchsweep.safety.power_readings import Needed, why_power_is_unknown
from pitchsweep.safety.safety_errors import GateRefused, LedgerBroken
from pitchsweep.safety.sign_off import LedgerMark, utc_seconds
from pitchsweep.safety.sign_off_making import Moment, statement_of
from pitchsweep.safety.sign_off_store import sign_and_keep, watched_files
from pitchsweep.safety.signers import revoke_signer

WORK = demo_work()
DAY_S = 86400.0


@pytest.fixture
def at(tmp_path: Path) -> Office:
    return office(tmp_path)


def begin(at: Office, *who: str, **changes: Any) -> str:
    """Begins a permit signed by ``who``; its identifier."""
    data = attended_begun(at, WORK.job, **changes)
    enter(at.home, ATTENDED_BEGUN, data, [at.keys[name] for name in who])
    return str(data["id"])


def test_who_may_hold_it_and_how_strong_it_may_be(at: Office) -> None:
    tech = {"name": TECHNICIAN, "role": "technician", "ceiling_mw": 1.0}
    assert begin(at, TECHNICIAN, **tech)
    assert begin(at, TECHNICIAN, OFFICER, **{**tech, "ceiling_mw": 3.0})
    found = list(read_people(at.home).people.attended.values())
    assert [one.ceiling_by for one in found] == ["", OFFICER]
    too_late = utc_text(time.time() + 3700.0)
    for who, changes, why in (
        ((TECHNICIAN,), {**tech, "ceiling_mw": 1.5}, "without a safety officer's"),
        ((WITNESS,), {"name": WITNESS, "role": "witness"}, "allowed safety-officer or"),
        ((TECHNICIAN,), {**tech, "role": "safety-officer"}, "enrolled as technician"),
        ((TECHNICIAN,), {"name": OFFICER}, "without its holder's signature"),
        ((), {}, "without its holder's signature"),
        ((OFFICER,), {"eyewear": " "}, "eyewear"),
        ((OFFICER,), {"valid_until": too_late}, "allowed up to 3600 s"),
        ((OFFICER,), {"valid_until": utc_text(time.time() - 1.0)}, "allowed up to"),
        ((OFFICER,), {"id": found[0].id}, "a second time"),
        ((OFFICER,), {"simulated": None}, "simulated"),
        ((OFFICER,), {"ceiling_mw": True}, "ceiling_mw"),
        ((OFFICER,), {"lasers": "red"}, "lasers"),
    ):
        with pytest.raises(LedgerBroken, match=why):
            begin(at, *who, **changes)


def test_a_power_is_read_by_the_holder_while_the_permit_lasts(at: Office) -> None:
    number = begin(at, OFFICER)
    good = power_read(WORK.job, "red", number)
    for who, changes, why in (
        (TECHNICIAN, {}, "without the signature of who held the key"),
        (OFFICER, {"attended": "a0"}, "under no attended permit"),
        (OFFICER, {"laser": "blue"}, "does not name"),
        (OFFICER, {"value_mw": -0.1}, "reads -0.1 mW"),
        (OFFICER, {"value_mw": "0.4"}, "value_mw"),
        (OFFICER, {"meter": ""}, "meter"),
    ):
        with pytest.raises(LedgerBroken, match=why):
            enter(at.home, POWER_READ, {**good, **changes}, [at.keys[who]])
    enter(at.home, POWER_READ, good, [at.keys[OFFICER]])
    ended = {"id": number, "ending": "done"}
    enter(at.home, ATTENDED_ENDED, ended)
    with pytest.raises(LedgerBroken, match="has ended"):
        enter(at.home, POWER_READ, good, [at.keys[OFFICER]])
    with pytest.raises(LedgerBroken, match="did not last"):
        enter(at.home, ATTENDED_ENDED, ended)


def test_nobody_signs_without_a_power_reading(at: Office) -> None:
    people = read_people(at.home)
    assert not people.people.powers
    moment = Moment(time.time(), "a1", people.people, LedgerMark(3, people.head))
    with pytest.raises(GateRefused, match="laser 'red' has no power reading"):
        statement_of(WORK, good_answers(WORK), moment)


def unknown(at: Office, **changes: Any) -> str:
    needed = Needed(WORK.job, WORK.checklist, time.time(), utc_text()[:10])
    people = read_people(at.home).people
    return why_power_is_unknown(replace(needed, **changes), people) or ""


def test_which_readings_count(at: Office) -> None:
    with_powers(at, WORK.job)
    assert unknown(at) == ""
    assert unknown(at, utc_s=time.time() + 29.9 * DAY_S) == ""
    assert "the checklist allows 30" in unknown(at, utc_s=time.time() + 31 * DAY_S)
    assert "is due on 2999-01-01" in unknown(at, last_day="2999-01-02")
    bench = WORK.job.bench
    for update, why in (
        ({"bench": "another"}, "no power reading"),
        ({"lasers": _lasers(vacuum_wavelength_nm=640.0)}, "the bench file says 640"),
        ({"lasers": _lasers(power_mw=0.3)}, "the bench file says at most 0.3 mW"),
    ):
        job = WORK.job.model_copy(update={"bench": bench.model_copy(update=update)})
        assert why in unknown(at, job=job), update
    with_powers(at, WORK.job, value_mw=0.95)
    assert "0.95 mW by m 1" in unknown(at)
    with_powers(at, WORK.job, value_mw=0.9)
    assert unknown(at) == ""


def _lasers(**changes: Any) -> dict[str, Any]:
    return {"red": WORK.job.bench.lasers["red"].model_copy(update=changes)}


def test_a_twins_reading_is_no_reading_of_a_real_bench(at: Office) -> None:
    with_powers(at, WORK.job)
    bench = WORK.job.bench.model_copy(update={"twin": None})
    job = WORK.job.model_copy(update={"bench": bench})
    assert "no power reading" in unknown(at, job=job)


def test_a_sign_off_names_its_readings_and_falls_with_them(at: Office) -> None:
    kept = signed(at, WORK)
    (power,) = kept.record.statement.powers
    assert (power["laser"], power["value_mw"], power["by"]) == ("red", 0.45, OFFICER)
    assert verdict(at, kept, WORK) == ""
    with_powers(at, WORK.job, value_mw=0.8)
    assert verdict(at, kept, WORK) == ""
    with_powers(at, WORK.job, value_mw=1.4)
    assert "read at 1.4 mW" in verdict(at, kept, WORK)


def test_readings_that_the_ledger_does_not_have(at: Office) -> None:
    statement = stated(at, WORK)
    (power,) = statement.powers
    for powers, why in (
        ((), "not every laser"),
        (({**power, "value_mw": 0.4},), "no such power reading"),
        (({**power, "hash": "00" * 32},), "no such power reading"),
        (({**power, "entry": 4},), "no such power reading"),
        (({**power, "key": "00" * 32},), "no such power reading"),
        (({**power, "highest_allowed_mw": 0.2},), "above the 0.2 mW"),
        (({**power, "highest_allowed_mw": None},), "does not say how much"),
    ):
        forged = replace(statement, powers=powers, id=str(time.monotonic_ns()))
        kept = sign_and_keep(at.home, forged, [at.keys[OFFICER]])
        assert why in verdict(at, kept, WORK), powers


def test_a_reading_falls_with_its_reader(at: Office) -> None:
    number = begin(at, TECHNICIAN, name=TECHNICIAN, role="technician", ceiling_mw=1.0)
    reading = power_read(WORK.job, "red", number)
    enter(at.home, POWER_READ, reading, [at.keys[TECHNICIAN]])
    kept = signed(at, WORK)
    assert verdict(at, kept, WORK) == ""
    revoke_signer(at.home, TECHNICIAN, "left", at.keys[OFFICER])
    assert "was read by 'bo', now revoked" in verdict(at, kept, WORK)
    # A guard that runs meanwhile sees it by this file.
    bo = str(at.home.revoked(at.keys[TECHNICIAN].public))
    assert watched_files(at.home, kept)[bo] == "" and Path(bo).exists()
    with pytest.raises(GateRefused, match="'bo' was revoked since"):
        stated(at, WORK)


def permit_of(at: Office, number: str, **changes: Any) -> AttendedPermit:
    found = read_people(at.home).people.attended[number]
    until_s = utc_seconds(found.valid_until)
    fields: dict[str, Any] = {
        "holder": OFFICER,
        "role": "safety-officer",
        "eyewear": "density 2, worn",
        "valid_from_utc_s": until_s - 600.0,
        "valid_until_utc_s": until_s,
        "power_ceiling_mw": 5.0,
        "ceiling_by": OFFICER,
        "identifier": number,
        "people_ledger": str(at.home.ledger),
        "key": KEY,
    }
    return AttendedPermit(**{**fields, **changes})


def unproven(at: Office, number: str, **changes: Any) -> str:
    config = guard_config(permit=permit_of(at, number, **changes))
    return why_permit_is_unproven(config, time.time()) or ""


def test_the_guard_asks_the_ledger_for_an_attended_permit(at: Office) -> None:
    number = begin(at, OFFICER)
    assert unproven(at, number) == ""
    for changes, why in (
        ({"identifier": "a0"}, "no such attended permit"),
        ({"identifier": "", "people_ledger": ""}, "ledger cannot be read"),
        ({"holder": TECHNICIAN}, "says holder ada"),
        ({"role": "technician"}, "says role safety-officer"),
        ({"power_ceiling_mw": 9.0}, "says ceiling mw 5.0"),
        ({"key": None}, "says simulated True"),
    ):
        assert why in unproven(at, number, **changes), changes
    late_s = permit_of(at, number).valid_until_utc_s + 60.0
    assert "lets it last until" in unproven(at, number, valid_until_utc_s=late_s)
    stranger = guard_config(permit=permit_of(at, number), identity="other-unit")
    assert "says unit" in str(why_permit_is_unproven(stranger, time.time()))
    enter(at.home, ATTENDED_ENDED, {"id": number, "ending": "done"})
    assert "has ended: done" in unproven(at, number)


def test_a_revoked_holder_has_no_permit(at: Office) -> None:
    number = begin(at, TECHNICIAN, name=TECHNICIAN, role="technician", ceiling_mw=1.0)
    tech = {
        "holder": TECHNICIAN,
        "role": "technician",
        "power_ceiling_mw": 1.0,
        "ceiling_by": "",
    }
    assert unproven(at, number, **tech) == ""
    revoke_signer(at.home, TECHNICIAN, "left", at.keys[OFFICER])
    assert "was revoked" in unproven(at, number, **tech)


def test_another_lasers_power_does_not_serve(at: Office) -> None:
    work = demo_work("track-740-violet")
    with_powers(at, demo_work("track-740-green").job)
    needed = Needed(work.job, work.checklist, time.time(), utc_text()[:10])
    why = why_power_is_unknown(needed, read_people(at.home).people)
    assert "laser 'violet' has no power reading" in str(why)
    assert changed(work, bench={}).job.bench == work.job.bench
