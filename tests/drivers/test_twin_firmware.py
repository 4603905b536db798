"""The twin's firmware and mechanics without a process: clocks are by hand."""

import json
import math
from collections.abc import Iterator
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pitchsweep.drivers.twin.emission_unit import EmissionUnit
from pitchsweep.drivers.twin.fault_schedule import Fault, FaultSchedule
from pitchsweep.drivers.twin.kept_state import KeptState, read_state, write_state
from pitchsweep.drivers.twin.stage_mechanics import Rest, StageMechanics, Windup
from pitchsweep.drivers.twin.unit_firmware import UnitFirmware
from pitchsweep.drivers.twin.unit_log import UnitLog


class _Unit:
    """A unit with a clock by hand; ``say`` sends a line and returns the answers."""

    def __init__(self, folder: Path, key: bytes = b"key", *faults: Fault) -> None:
        self.time_s = 100.0
        self.path = folder / "unit.log"
        self.log = UnitLog(self.path)
        self.unit = EmissionUnit(
            self.log, keep_alive_s=0.2, has_shutter=True, clock=lambda: self.time_s
        )
        self.firmware = UnitFirmware(
            self.unit, identity="unit-9", key=key, faults=FaultSchedule(faults)
        )

    def say(self, line: bytes) -> list[bytes]:
        return [reply.data for reply in self.firmware.receive(line)]

    def light(self) -> bytes:
        """Asks how it stands and quotes that ticket; the answer to it."""
        (standing,) = self.say(b"N1 STATE\n")
        (answer,) = self.say(b"N1 LIGHT " + standing.split()[-1] + b"\n")
        return answer

    def rows(self) -> list[tuple[str, str]]:
        rows = map(json.loads, self.path.read_text().splitlines())
        return [(row["what"], row["value"]) for row in rows]


@pytest.fixture
def unit(tmp_path: Path) -> Iterator[_Unit]:
    made = _Unit(tmp_path)
    yield made
    made.log.close()


def test_light_lapses_without_keep_alive(unit: _Unit) -> None:
    answer = b"N1 LIGHT LIT DOOR SHUT SECOND ABSENT SHUTTER CLEAR RESETS 0 LAPSES 0"
    assert unit.light() == answer + b" TICKET 2\n"
    unit.time_s += 0.19
    assert unit.firmware.due_in_s() == pytest.approx(0.01)
    unit.time_s += 0.02
    assert unit.firmware.due_in_s() is None
    answer = b"N2 LIGHT DARK DOOR SHUT SECOND ABSENT SHUTTER SHUT RESETS 0 LAPSES 1"
    assert unit.say(b"N2 STATE\n") == [answer + b" TICKET 3\n"]
    assert unit.rows() == [("light", "on"), ("light", "off")]


def test_what_holds_the_light_never_brings_it_back(unit: _Unit) -> None:
    unit.light()
    unit.time_s += 0.21
    assert unit.say(b"N2 KEEP\n") == [b"N2 DECLINED DARK\n"]
    assert unit.rows() == [("light", "on"), ("light", "off")]


def test_light_asked_for_too_late_or_on_an_old_ticket_is_declined(unit: _Unit) -> None:
    assert unit.say(b"N1 LIGHT 0\n") == [b"N1 DECLINED TOO-LATE\n"]
    unit.say(b"N2 STATE\n")
    unit.say(b"N3 STATE\n")
    assert unit.say(b"N4 LIGHT 1\n") == [b"N4 DECLINED TOO-LATE\n"]
    unit.time_s += 0.21
    assert unit.say(b"N5 LIGHT 2\n") == [b"N5 DECLINED TOO-LATE\n"]
    assert unit.say(b"N6 LIGHT two\n") == [b"N6 DECLINED UNREADABLE\n"]
    assert not unit.unit.is_lit() and unit.rows() == []


def test_asking_for_state_does_not_hold_the_light(unit: _Unit) -> None:
    unit.light()
    for _ in range(5):
        unit.time_s += 0.05
        unit.say(b"N2 STATE\n")
    assert not unit.unit.is_lit()


def test_an_open_door_is_told_but_does_not_cut_the_light(unit: _Unit) -> None:
    unit.light()
    unit.unit.set_door(closed=False)
    unit.unit.press_reset()
    answer = b"N2 LIGHT LIT DOOR AJAR SECOND ABSENT SHUTTER CLEAR RESETS 1 LAPSES 0"
    assert unit.say(b"N2 KEEP\n") == [answer + b" TICKET 3\n"]
    assert b"LIGHT DARK" in unit.say(b"N3 DARK\n")[0]
    assert unit.rows()[-1] == ("light", "off")


def test_the_proof_is_hmac_sha256(tmp_path: Path) -> None:
    # RFC 4231, test case 2: key "Jefe", data "what do ya want for nothing?".
    unit = _Unit(tmp_path, b"Jefe")
    challenge = b"what do ya want for nothing?".hex().encode()
    assert unit.say(b"N1 PROVE " + challenge + b"\n") == [
        b"N1 PROOF 5bdcc146bf60754e6a042426089575c75a003f089d2739839dec58b964ec3843\n"
    ]
    assert unit.say(b"N2 PROVE xyz\n") == [b"N2 DECLINED UNREADABLE\n"]
    assert unit.say(b"N3 PROVE " + b"00" * 33 + b"\n") == [b"N3 DECLINED UNREADABLE\n"]
    unit.log.close()


def test_firmware_reads_lines_cut_anywhere_and_refuses_the_rest(unit: _Unit) -> None:
    cut = [unit.say(bytes([byte])) for byte in b"N5 WHO\n"]
    assert sum(cut, []) == [b"N5 NAMED unit-9\n"]
    assert unit.say(b"N6 WHO\nN7 WHO\n\n") == [
        b"N6 NAMED unit-9\n",
        b"N7 NAMED unit-9\n",
        b"N0 DECLINED UNREADABLE\n",
    ]
    assert unit.say(b"N8 SHINE\n") == [b"N8 DECLINED UNREADABLE\n"]


def test_faults_come_at_their_occasion(tmp_path: Path) -> None:
    unit = _Unit(
        tmp_path,
        b"key",
        Fault("unit-ask", 2, "silent"),
        Fault("unit-ask", 3, "garbage"),
        Fault("unit-keep", 1, "light-stuck"),
    )
    assert unit.say(b"N1 WHO\n") == [b"N1 NAMED unit-9\n"]
    assert unit.say(b"N2 WHO\n") == []
    assert not unit.say(b"N3 WHO\n")[0].startswith(b"N3")
    unit.light()
    assert b"LIGHT LIT" in unit.say(b"N5 DARK\n")[0]
    unit.log.close()


@pytest.mark.parametrize(
    ("at", "nth", "does"), [("nowhere", 1, "silent"), ("unit-ask", 1, "explode")]
)
def test_an_unknown_fault_is_refused(at: str, nth: int, does: str) -> None:
    with pytest.raises(ValueError, match="fault"):
        Fault(at, nth, does)


def test_backlash_is_taken_up_only_from_below() -> None:
    stage = StageMechanics(Rest(0.0, 0.0, True, 0.0), backlash_deg=0.1)
    stage.move(5.0, 1.0, 0.0)
    assert stage.table_deg(2.5) == 2.5 and stage.turning(2.5)
    assert stage.table_deg(5.0) == 5.0 and not stage.turning(5.0)
    stage.move(4.0, 1.0, 10.0)
    assert stage.table_deg(11.0) == pytest.approx(4.1)
    stage.move(4.05, 1.0, 20.0)
    assert stage.table_deg(21.0) == pytest.approx(4.1)
    stage.move(4.5, 1.0, 30.0)
    assert stage.table_deg(40.0) == 4.5


@given(st.lists(st.floats(-150, 150), min_size=1, max_size=6), st.floats(-150, 150))
def test_an_angle_reached_from_below_is_the_same_whatever_went_before(
    history: list[float], angle_deg: float
) -> None:
    stage = StageMechanics(Rest(1.0, 0.03, True, 0.0), backlash_deg=0.2)
    for i, target in enumerate([*history, angle_deg - 0.5, angle_deg]):
        stage.move(target, 10.0, 100.0 * i)
    assert stage.table_deg(1e6) == angle_deg


def test_a_zero_lost_shows_a_wrong_reading_until_homed() -> None:
    stage = StageMechanics(Rest(20.0, 0.0, True, 0.0), backlash_deg=0.0)
    stage.lose_zero(1.0, 7.0)
    assert stage.reading_deg(2.0) == pytest.approx(13.0) and not stage.homed(2.0)
    stage.seek_zero(10.0, 3.0)
    assert not stage.homed(6.9) and stage.homed(7.0)
    assert stage.reading_deg(7.0) == 0.0
    stage.seek_zero(10.0, 8.0)
    stage.halt(8.5)
    assert not stage.homed(20.0)


def test_kept_state_comes_back(tmp_path: Path) -> None:
    path = tmp_path / "state.json"
    assert read_state(path) is None
    state = KeptState(Rest(12.3456, 0.0, True, 0.0), 77.25)
    write_state(path, state)
    assert read_state(path) == state
    assert [entry.name for entry in tmp_path.iterdir()] == ["state.json"]


def test_what_stays_wound_up_unwinds_over_the_run_up() -> None:
    windup = Windup(size_deg=0.01, run_up_deg=2.0)
    stage = StageMechanics(Rest(0.0, 0.0, True, 0.0), backlash_deg=0.1, windup=windup)
    stage.move(40.0, 10.0, 0.0)
    assert stage.table_deg(100.0) == pytest.approx(40.0, abs=1e-8)
    stage.move(29.5, 10.0, 100.0)
    stage.move(30.0, 10.0, 200.0)
    left = 0.01 * math.exp(-0.5 / 2.0)
    assert stage.table_deg(300.0) == pytest.approx(30.0 + left)
    again = StageMechanics(stage.rest(300.0), backlash_deg=0.1, windup=windup)
    again.move(31.5, 10.0, 400.0)
    left = 0.01 * math.exp(-2.0 / 2.0)
    assert again.table_deg(500.0) == pytest.approx(31.5 + left)
