"""A rehearsal offered to units that are no twin of this run, wherever they are."""

import time
from pathlib import Path

import pytest
from emulated_unit import EmulatedUnit
from guard_builders import KEY, POWER_MW, guard_config

from pitchsweep.drivers.dialect_files import shipped_dialect_mapping
from pitchsweep.safety.guard_client import start_guard
from pitchsweep.safety.guard_config import GuardConfig
from pitchsweep.safety.safety_errors import GateTripped


def config_for(unit: EmulatedUnit, line: str) -> GuardConfig:
    dialect = shipped_dialect_mapping("emission-line")
    assert isinstance(dialect, dict)
    return guard_config(
        port=unit.port,
        dialect=dialect,
        ledger=unit.log.parent / "ledger.jsonl",
        utc_s=time.time(),
        line=line,
    )


@pytest.mark.parametrize(
    ("kind", "key", "event"),
    [
        ("real", KEY, "proof-failed"),
        ("real on a socket", KEY, "proof-failed"),
        ("keep-alive", bytes(32), "proof-failed"),
        ("socket", bytes(32), "proof-failed"),
        ("bare relay", KEY, "unit-silent"),
        ("pulses", bytes(32), "proof-failed"),
    ],
    ids=lambda value: value if isinstance(value, str) else "",
)
def test_a_rehearsal_is_refused_by_what_is_not_its_own_twin(
    tmp_path: Path, kind: str, key: bytes, event: str
) -> None:
    unit = EmulatedUnit(tmp_path / "unit.log", key, line=kind)
    line = "pulses" if kind in ("bare relay", "pulses") else "keep-alive"
    try:
        with start_guard(config_for(unit, line)) as guard:
            with pytest.raises(GateTripped, match=event):
                guard.arm(unit)
            with pytest.raises(GateTripped):
                guard.light_on(1, 0.0, 0.0, POWER_MW)
    finally:
        unit.end()
    assert unit.rows("light") == []


def test_the_twins_own_relay_passes_and_goes_dark_with_the_door(tmp_path: Path) -> None:
    unit = EmulatedUnit(tmp_path / "unit.log", KEY, line="pulses")
    try:
        with start_guard(config_for(unit, "pulses")) as guard:
            guard.arm(unit)
            guard.light_on(1, 0.0, 0.0, POWER_MW)
            time.sleep(0.5)
            guard.check()
            unit.tell("open")
            assert guard.tripped.wait(5.0)
            with pytest.raises(GateTripped, match="interlock"):
                guard.check()
    finally:
        unit.end()
    assert [value for _, value, _ in unit.rows("light")] == ["on", "off"]
