"""The guard proves an unattended permit for itself, and sees it end. Real time."""

import time
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import pytest
from emulated_unit import EmulatedUnit
from guard_builders import KEY, POWER_MW, guard_config
from sign_off_builders import (
    OFFICER,
    TECHNICIAN,
    Office,
    demo_work,
    edit_json,
    ledger_lines,
    office,
    signed,
    write_ledger,
)

from pitchsweep.drivers.dialect_files import shipped_dialect_mapping
from pitchsweep.safety.guard_client import GuardClient, start_guard
from pitchsweep.safety.guard_config import GuardConfig, UnitSettings
from pitchsweep.safety.permit import (
    permit_as_mapping,
    permit_from_mapping,
    why_permit_lapsed,
)
from pitchsweep.safety.permit_proof import why_permit_is_unproven, work_of
from pitchsweep.safety.permitted_steps import PermittedSteps
from pitchsweep.safety.safety_errors import GateRefused, GateTripped
from pitchsweep.safety.sign_off_store import Kept, revoke, watched_files
from pitchsweep.safety.signers import revoke_signer
from pitchsweep.safety.unattended_permit import UnattendedPermit

LIMIT_S = 10.0


@pytest.fixture
def at(tmp_path: Path) -> Office:
    return office(tmp_path)


def kept_for(at: Office, config: GuardConfig) -> Kept:
    """A sign-off for the unit and angles of ``config``."""
    return signed(at, replace(demo_work(), work_sha256=work_of(config)))


def with_permit(at: Office, config: GuardConfig, kept: Kept) -> GuardConfig:
    permit = UnattendedPermit(kept.record, str(at.home.ledger), KEY)
    return replace(config, permit=permit, watched=watched_files(at.home, kept))


@pytest.fixture
def config(at: Office) -> GuardConfig:
    """A guard's configuration with a sign-off that fits it."""
    bare = guard_config()
    return with_permit(at, bare, kept_for(at, bare))


def unproven(config: GuardConfig, after_s: float = 0.0) -> str:
    return why_permit_is_unproven(config, time.time() + after_s) or ""


def test_a_permit_that_holds_is_proven_and_lapses_with_its_window(
    config: GuardConfig,
) -> None:
    assert unproven(config) == ""
    assert "expired" in unproven(config, after_s=15 * 3600.0)
    permit, now = config.permit, time.time()
    assert isinstance(permit, UnattendedPermit)
    assert why_permit_lapsed(permit, utc_s=now, utc_by_monotonic_s=now) is None
    late = now + 15 * 3600.0
    assert why_permit_lapsed(permit, utc_s=late, utc_by_monotonic_s=late) is not None
    assert why_permit_lapsed(permit, utc_s=now, utc_by_monotonic_s=now + 9.0)


def test_it_survives_its_mapping(config: GuardConfig) -> None:
    assert permit_from_mapping(permit_as_mapping(config.permit)) == config.permit
    assert KEY.hex() not in repr(config)


def test_a_rehearsed_sign_off_needs_the_twins_key(config: GuardConfig) -> None:
    values = permit_as_mapping(config.permit)
    for key in (None, "00", 5):
        with pytest.raises(ValueError):
            permit_from_mapping({**values, "key": key})
    with pytest.raises(ValueError):
        permit_from_mapping({**values, "record": "{}"})


@pytest.mark.parametrize(
    "change",
    [
        {"permitted": PermittedSteps({0: -10.0, 1: 0.5, 2: 10.0}, 0.01, 5.0, 5.0)},
        {"permitted": PermittedSteps({0: -10.0, 1: 0.0, 2: 10.0}, 1.0, 5.0, 5.0)},
        {"permitted": PermittedSteps({0: -10.0, 1: 0.0, 2: 10.0}, 0.01, 5.0, 400.0)},
        {"unit": UnitSettings("/dev/null", 115200, {"any": 1}, "another", 200)},
        {"unit": UnitSettings("/dev/null", 115200, {"any": 1}, "bench-unit-1", 250)},
    ],
)
def test_other_work_than_was_signed_is_not_proven(
    config: GuardConfig, change: dict[str, PermittedSteps]
) -> None:
    assert "not those that were signed" in unproven(replace(config, **change))  # type: ignore[arg-type]


def test_the_order_of_the_angles_is_free(config: GuardConfig) -> None:
    angles = dict(zip((5, 6, 7), config.permitted.angles_deg.values(), strict=True))
    steps = replace(config.permitted, angles_deg=angles)
    assert unproven(replace(config, permitted=steps)) == ""


def test_what_happened_to_the_ledger_and_the_people_counts(
    at: Office, config: GuardConfig
) -> None:
    saved = at.home.ledger.read_bytes()
    revoke_signer(at.home, OFFICER, "retired", at.keys[OFFICER])
    assert "signer 'ada' was revoked" in unproven(config)
    at.home.ledger.write_bytes(saved)
    entries = ledger_lines(at.home)
    write_ledger(at.home, entries[:3])
    assert "no such sign-off" in unproven(config)
    entries[1]["data"]["name"] = "mo"
    write_ledger(at.home, entries)
    assert "entry 2 of the people's ledger" in unproven(config)
    at.home.ledger.unlink()
    assert "no such sign-off" in unproven(config)


def test_an_edited_record_is_not_proven(at: Office, config: GuardConfig) -> None:
    permit = config.permit
    assert isinstance(permit, UnattendedPermit)
    statement = replace(permit.record.statement, valid_until="2999-01-01T00:00:00Z")
    longer = replace(permit, record=replace(permit.record, statement=statement))
    assert "does not fit" in unproven(replace(config, permit=longer))
    softer = replace(permit.record.statement, needed=(("technician",),))
    record = replace(permit.record, statement=softer)
    assert unproven(replace(config, permit=replace(permit, record=record)))


@pytest.fixture
def unit(tmp_path: Path) -> Iterator[EmulatedUnit]:
    emulated = EmulatedUnit(tmp_path / "unit.log", KEY)
    yield emulated
    emulated.end()


def config_for(unit: EmulatedUnit, at: Office) -> tuple[GuardConfig, Kept]:
    dialect = shipped_dialect_mapping("emission-line")
    assert isinstance(dialect, dict)
    ledger = unit.log.parent / "ledger.jsonl"
    bare = guard_config(
        port=unit.port, dialect=dialect, ledger=ledger, utc_s=time.time()
    )
    kept = kept_for(at, bare)
    return with_permit(at, bare, kept), kept


def lit(guard: GuardClient, unit: EmulatedUnit) -> None:
    guard.arm(unit)
    guard.light_on(1, 0.0, 0.0, POWER_MW)


def test_a_signed_run_is_lit_and_goes_dark_when_its_sign_off_is_revoked(
    unit: EmulatedUnit, at: Office
) -> None:
    config, kept = config_for(unit, at)
    with start_guard(config) as guard:
        lit(guard, unit)
        revoke(at.home, kept.record.statement.id, name="anyone", reason="smoke")
        assert guard.tripped.wait(LIMIT_S)
        with pytest.raises(GateTripped, match="revoked"):
            guard.check()
    assert [value for _, value, _ in unit.rows("light")] == ["on", "off"]


def test_a_record_edited_in_the_night_means_dark(
    unit: EmulatedUnit, at: Office
) -> None:
    config, kept = config_for(unit, at)
    with start_guard(config) as guard:
        lit(guard, unit)
        edit_json(kept.path, lambda values: None)
        assert guard.tripped.wait(LIMIT_S)
    assert [value for _, value, _ in unit.rows("light")] == ["on", "off"]


def test_a_guard_does_not_begin_with_a_sign_off_that_does_not_count(
    unit: EmulatedUnit, at: Office
) -> None:
    config, kept = config_for(unit, at)
    revoke(at.home, kept.record.statement.id, name=TECHNICIAN, reason="hinge")
    with pytest.raises(GateRefused, match="sign-off: it was revoked by bo"):
        start_guard(config)
    assert unit.rows("light") == []


def test_a_rehearsed_sign_off_lights_no_unit_that_is_not_the_twin(
    tmp_path: Path, at: Office
) -> None:
    unit = EmulatedUnit(tmp_path / "unit.log", KEY, line="real")
    try:
        config, _ = config_for(unit, at)
        with start_guard(config) as guard, pytest.raises((GateRefused, GateTripped)):
            lit(guard, unit)
        assert unit.rows("light") == []
    finally:
        unit.end()
