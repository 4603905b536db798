"""A time-out relay fed with pulses: what makes it close, and what never does."""

import json
import time
from collections.abc import Iterator
from pathlib import Path

import pytest
import serial

from pitchsweep.drivers.dialect_files import shipped_dialect
from pitchsweep.drivers.driver_errors import (
    DeviceRefused,
    LineBroke,
    NoAnswerInTime,
)
from pitchsweep.drivers.line_client import LineClient
from pitchsweep.drivers.modem_port import Contacts
from pitchsweep.drivers.pulse_line import PulseLineClient, open_pulse_line
from pitchsweep.drivers.transport import FakeTransport
from pitchsweep.drivers.twin.emission_unit import EmissionUnit
from pitchsweep.drivers.twin.fault_schedule import FaultSchedule
from pitchsweep.drivers.twin.relay import TimeOutRelay
from pitchsweep.drivers.twin.relay_port import RelayPort
from pitchsweep.drivers.twin.unit_firmware import RelayBoxFirmware
from pitchsweep.drivers.twin.unit_log import UnitLog

# pyserial's own network client still uses it.
pytestmark = pytest.mark.filterwarnings("ignore:set(Daemon|Name):DeprecationWarning")

KEY = bytes(range(32))
IDENTITY = "bench-unit-1"


class Bench:
    """A relay, its unit and a client on a clock that is told the time."""

    def __init__(self, folder: Path, *, channels: int = 1) -> None:
        self.now_s = 100.0
        self.log = UnitLog(folder / "unit.log")
        self.unit = EmissionUnit(
            self.log,
            keep_alive_s=0.2,
            has_shutter=False,
            channels=channels,
            clock=lambda: self.now_s,
        )
        self.relay = TimeOutRelay(self.unit, clock=lambda: self.now_s)
        self.client = PulseLineClient(
            self,
            LineClient(
                FakeTransport(lambda data: []),
                shipped_dialect("emission-line"),
                device="relay",
            ),
            device="relay",
            timeout_s=0.1,
            channels=channels,
            wait=self.advance,
        )

    def advance(self, seconds: float) -> None:
        self.now_s += seconds

    def set_pulse(self, level: bool) -> None:
        self.relay.rts = level

    def set_enable(self, level: bool) -> None:
        self.relay.dtr = level

    def contacts(self, wait_s: float) -> Contacts:
        relay = self.relay
        return Contacts(cts=relay.cts, dsr=relay.dsr, cd=relay.cd, ri=relay.ri)

    def keep(self, seconds: float, period_s: float = 0.04) -> None:
        """Half a pulse every ``period_s``, as the guard's tick sends them."""
        for number in range(round(seconds / period_s)):
            self.client.keep_lit() if number else self.client.light_up()
            self.advance(period_s)


@pytest.fixture
def bench(tmp_path: Path) -> Iterator[Bench]:
    made = Bench(tmp_path)
    yield made
    made.log.close()


def test_a_train_of_pulses_means_light_and_its_end_dark(bench: Bench) -> None:
    bench.keep(2.0)
    assert bench.client.state().light_on and bench.unit.is_lit()
    bench.advance(0.2)
    assert not bench.client.state().light_on and not bench.unit.is_lit()
    assert bench.client.state().lapse_count == 1


def test_one_edge_as_when_a_port_is_opened_means_no_light(bench: Bench) -> None:
    bench.relay.dtr = True
    bench.relay.rts = True
    bench.advance(0.01)
    assert not bench.unit.is_lit() and not bench.relay.dsr


@pytest.mark.parametrize("level", [True, False])
def test_a_level_that_stays_means_dark(bench: Bench, level: bool) -> None:
    bench.keep(1.0)
    bench.relay.rts = level
    bench.advance(0.21)
    assert not bench.unit.is_lit()


@pytest.mark.parametrize("period_s", [0.01, 0.3])
def test_pulses_out_of_5_to_20_hz_never_close_the_relay(
    bench: Bench, period_s: float
) -> None:
    bench.keep(4.0, period_s)
    assert not bench.relay.dsr and not bench.unit.is_lit()


def test_pulses_alone_or_letting_through_alone_mean_dark(bench: Bench) -> None:
    for level in (True, False) * 20:
        bench.relay.rts = level
        bench.advance(0.05)
    assert bench.relay.dsr and not bench.unit.is_lit()
    bench.advance(1.0)
    bench.relay.dtr = True
    bench.advance(0.01)
    assert not bench.unit.is_lit()


def test_dark_is_at_once_and_no_lapse(bench: Bench) -> None:
    bench.keep(1.0)
    assert not bench.client.dark().light_on
    assert not bench.unit.is_lit()
    bench.advance(0.3)
    assert bench.client.state().lapse_count == 0


def test_the_trial_closes_the_relay_in_the_dark_and_counts_its_opening(
    bench: Bench,
) -> None:
    bench.client.dark()
    bench.client.ready_trial()
    begun = bench.client.try_time_out()
    assert bench.relay.dsr and not begun.light_on
    bench.advance(0.19)
    assert bench.client.state().lapse_count == begun.lapse_count
    bench.advance(0.02)
    assert bench.client.state().lapse_count == begun.lapse_count + 1
    assert not bench.unit.is_lit()


def test_no_trial_while_light_is_let_through(bench: Bench) -> None:
    bench.keep(0.1)
    with pytest.raises(DeviceRefused, match="let through"):
        bench.client.ready_trial()


def test_a_relay_that_does_not_close_is_refused(bench: Bench) -> None:
    bench.set_pulse = lambda level: None  # type: ignore[method-assign]
    with pytest.raises(DeviceRefused, match="does not close"):
        bench.client.ready_trial()


def test_presses_of_the_reset_input_are_counted_once(bench: Bench) -> None:
    for _ in range(2):
        bench.unit.press_reset()
        for _ in range(50):
            bench.client.state()
            bench.advance(0.01)
    assert bench.client.state().reset_count == 2


def test_interlock_contacts_are_read_apart(tmp_path: Path) -> None:
    bench = Bench(tmp_path, channels=2)
    bench.unit.set_door(closed=False, channel=2)
    says = bench.client.state()
    assert (says.door_closed, says.second_closed) == (True, False)
    assert not says.channels_agree
    bench.log.close()


def test_one_channel_only_is_said_to_be_one(bench: Bench) -> None:
    assert bench.client.state().second_closed is None


@pytest.fixture
def port(tmp_path: Path) -> Iterator[RelayPort]:
    log = UnitLog(tmp_path / "unit.log")
    unit = EmissionUnit(log, keep_alive_s=0.2, has_shutter=False)
    box = RelayBoxFirmware(IDENTITY, KEY, FaultSchedule())
    served = RelayPort(TimeOutRelay(unit), box)
    yield served
    served.close()
    log.close()


def open_client(url: str) -> PulseLineClient:
    dialect = shipped_dialect("emission-line")
    return open_pulse_line(url, dialect, device="relay", timeout_s=0.5, channels=1)


def light_rows(folder: Path) -> list[str]:
    rows = map(json.loads, (folder / "unit.log").read_text().splitlines())
    return [row["value"] for row in rows if row["what"] == "light"]


def test_over_rfc_2217_identity_challenge_pulses_and_contacts(
    port: RelayPort, tmp_path: Path
) -> None:
    client = open_client(port.path)
    assert client.identify() == IDENTITY
    assert len(client.prove(b"n" * 16)) == 32
    assert light_rows(tmp_path) == []
    until_s = time.monotonic() + 5.0
    while not client.light_up().light_on:
        time.sleep(0.04)
        assert time.monotonic() < until_s
    assert client.state().door_closed
    client.close()
    deadline_s = time.monotonic() + 5.0
    while light_rows(tmp_path) != ["on", "off"]:
        time.sleep(0.01)
        assert time.monotonic() < deadline_s


def test_merely_opening_the_port_as_any_program_does_means_no_light(
    port: RelayPort, tmp_path: Path
) -> None:
    other = serial.serial_for_url(port.path)
    assert other.rts and other.dtr
    other.close()
    assert light_rows(tmp_path) == []


def test_a_port_server_that_says_nothing_is_no_answer(
    port: RelayPort, monkeypatch: pytest.MonkeyPatch
) -> None:
    client = open_client(port.path)
    monkeypatch.setattr(
        "serial.rfc2217.PortManager.check_modem_lines", lambda *a, **k: None
    )
    with pytest.raises(NoAnswerInTime, match="contacts"):
        client.state()
    client.close()


def test_a_port_that_is_not_there_is_told() -> None:
    with pytest.raises(LineBroke):
        open_client("rfc2217://127.0.0.1:9")
