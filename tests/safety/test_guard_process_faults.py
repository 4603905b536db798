"""The guard as a process, against a unit in another process that judges the light.

Real time is used here: the safety clock is always the real one.
"""

import json
import os
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from emulated_unit import KEEP_ALIVE_S, EmulatedUnit
from guard_builders import KEY, POWER_MW, guard_config

from pitchsweep.drivers.dialect_files import shipped_dialect_mapping
from pitchsweep.drivers.driver_errors import LineBroke
from pitchsweep.safety.guard_client import GuardClient, start_guard
from pitchsweep.safety.guard_config import GuardConfig, config_as_mapping
from pitchsweep.safety.ledger import verify
from pitchsweep.safety.safety_errors import GateRefused, GateTripped, GuardLost
from pitchsweep.safety.stage_report import StageReport

CONTROLLER = Path(__file__).parent.parent / "lighting_controller.py"
LIMIT_S = 10.0
LATE_S = 0.5
"""Allowance for a loaded machine; typical figures are printed by the benchmark."""


@pytest.fixture
def unit(tmp_path: Path) -> Iterator[EmulatedUnit]:
    emulated = EmulatedUnit(tmp_path / "unit.log", KEY)
    yield emulated
    emulated.end()


def config_for(unit: EmulatedUnit, **changes: object) -> GuardConfig:
    dialect = shipped_dialect_mapping("emission-line")
    assert isinstance(dialect, dict)
    return guard_config(
        port=unit.port,
        dialect=dialect,
        ledger=unit.log.parent / "ledger.jsonl",
        utc_s=time.time(),
        **changes,  # type: ignore[arg-type]
    )


def moving(step: int, angle_deg: float) -> StageReport:
    """The stage on its way to a step."""
    return StageReport(step, angle_deg, 0.0, time.monotonic(), True, POWER_MW)


@pytest.fixture
def lit(unit: EmulatedUnit) -> Iterator[GuardClient]:
    with start_guard(config_for(unit)) as guard:
        guard.arm(unit)
        guard.light_on(1, 0.0, 0.0, POWER_MW)
        yield guard


def soon(condition: Callable[[], bool]) -> None:
    """Waits on the real clock until ``condition`` holds."""
    until_s = time.monotonic() + LIMIT_S
    while not condition():
        assert time.monotonic() < until_s, "did not happen in time"
        time.sleep(0.002)


def dark_after(unit: EmulatedUnit, since_s: float) -> float:
    """Seconds from ``since_s`` until the unit's log says dark."""
    soon(lambda: unit.rows("light")[-1][1] == "off")
    return unit.rows("light")[-1][0] - since_s


def test_a_run_of_steps_is_lit_only_between_light_and_dark(unit: EmulatedUnit) -> None:
    with start_guard(config_for(unit)) as guard:
        guard.arm(unit)
        for step, angle in ((0, -10.0), (1, 0.0), (2, 10.0)):
            guard.report_stage(moving(step, angle))
            guard.light_on(step, angle, angle, POWER_MW)
            guard.dark()
        assert guard.state.value == "ready"
    values = [value for _, value, _ in unit.rows("light")]
    assert values == ["on", "off"] * 3
    check = verify(unit.log.parent / "ledger.jsonl")
    assert check.holds and check.count == 6
    assert [e.event for e in guard.events][-1] == "end-requested"


def test_the_light_is_held_well_beyond_one_keep_alive(
    unit: EmulatedUnit, lit: GuardClient
) -> None:
    time.sleep(3 * KEEP_ALIVE_S)
    assert [value for _, value, _ in unit.rows("light")] == ["on"]
    lit.check()


def test_an_open_door_means_dark_and_the_next_call_raises(
    unit: EmulatedUnit, lit: GuardClient
) -> None:
    unit.tell("open")
    soon(lambda: len(unit.rows("door")) == 3)
    assert dark_after(unit, unit.rows("door")[-1][0]) < LATE_S
    assert lit.tripped.wait(LIMIT_S)
    with pytest.raises(GateTripped, match="interlock-open") as caught:
        lit.check()
    assert caught.value.exit_code == 3
    with pytest.raises(GateTripped):
        lit.light_on(1, 0.0, 0.0, POWER_MW)


def test_after_a_trip_only_reset_and_name_lead_back(
    unit: EmulatedUnit, lit: GuardClient
) -> None:
    lit.trip("zero order not where predicted")
    with pytest.raises(GateTripped, match="zero order"):
        lit.arm(unit)
    with pytest.raises(GateRefused, match="reset input"):
        lit.acknowledge("A. Person")
    unit.tell("reset")
    soon(lambda: len(unit.rows("reset")) == 1)
    lit.acknowledge("A. Person")
    with pytest.raises(GateRefused, match="not armed"):
        lit.light_on(1, 0.0, 0.0, POWER_MW)
    lit.arm(unit)
    lit.light_on(1, 0.0, 0.0, POWER_MW)


def test_a_resumed_run_is_tripped_at_once(unit: EmulatedUnit) -> None:
    with start_guard(config_for(unit, resumed=True)) as guard:
        with pytest.raises(GateTripped, match="resumed"):
            guard.arm(unit)


def lighting_controller(unit: EmulatedUnit) -> "tuple[subprocess.Popen[bytes], int]":
    """A controller process that has lit the unit, and its guard's process number."""
    controller = subprocess.Popen(
        [sys.executable, str(CONTROLLER)],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        start_new_session=True,
    )
    assert controller.stdin is not None and controller.stdout is not None
    message = json.dumps(config_as_mapping(config_for(unit)))
    controller.stdin.write(message.encode() + b"\n")
    controller.stdin.flush()
    for asked in ("open", "close"):
        assert controller.stdout.readline().decode().strip() == asked
        unit.tell(asked)
    return controller, int(controller.stdout.readline())


def finish(controller: "subprocess.Popen[bytes]") -> None:
    controller.kill()
    controller.wait()
    for pipe in (controller.stdin, controller.stdout):
        assert pipe is not None
        pipe.close()


def is_gone(pid: int) -> bool:
    try:
        state = Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()[0]
    except FileNotFoundError:
        return True
    return state == "Z"


def test_a_killed_controller_means_dark_and_the_guard_ends(unit: EmulatedUnit) -> None:
    controller, guard_pid = lighting_controller(unit)
    killed_s = time.monotonic()
    os.killpg(controller.pid, signal.SIGKILL)
    assert dark_after(unit, killed_s) < LATE_S
    soon(lambda: is_gone(guard_pid))
    finish(controller)


def test_a_stopped_controller_means_dark_by_its_heartbeat(unit: EmulatedUnit) -> None:
    controller, _ = lighting_controller(unit)
    stopped_s = time.monotonic()
    os.kill(controller.pid, signal.SIGSTOP)
    assert dark_after(unit, stopped_s) < 0.3 + LATE_S
    finish(controller)


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT, signal.SIGHUP])
def test_a_signal_to_the_guard_means_dark_and_its_end(
    unit: EmulatedUnit, lit: GuardClient, number: int
) -> None:
    sent_s = time.monotonic()
    os.kill(lit.pid, number)
    assert dark_after(unit, sent_s) < LATE_S
    assert lit.lost.wait(LIMIT_S)
    with pytest.raises(GuardLost, match="signal"):
        lit.light_on(1, 0.0, 0.0, POWER_MW)


def test_a_killed_guard_means_dark_by_the_units_own_keep_alive(
    unit: EmulatedUnit, lit: GuardClient
) -> None:
    killed_s = time.monotonic()
    os.kill(lit.pid, signal.SIGKILL)
    assert dark_after(unit, killed_s) < KEEP_ALIVE_S + LATE_S
    assert unit.rows("light")[-1][2] == "keep-alive ran out"
    assert lit.lost.wait(LIMIT_S)
    with pytest.raises(GuardLost):
        lit.dark()


def test_a_stopped_guard_means_dark_and_stays_dark_when_it_goes_on(
    unit: EmulatedUnit, lit: GuardClient
) -> None:
    stopped_s = time.monotonic()
    os.kill(lit.pid, signal.SIGSTOP)
    assert dark_after(unit, stopped_s) < KEEP_ALIVE_S + LATE_S
    os.kill(lit.pid, signal.SIGCONT)
    assert lit.tripped.wait(LIMIT_S)
    assert [value for _, value, _ in unit.rows("light")] == ["on", "off"]


def test_an_unreadable_message_means_dark(unit: EmulatedUnit, lit: GuardClient) -> None:
    pipe = lit._pipe.process.stdin
    assert pipe is not None
    with lit._pipe.sending:
        pipe.write(b"garbage\n")
        pipe.flush()
    assert lit.tripped.wait(LIMIT_S)
    assert lit.events[-1].event == "controller-fault"
    assert unit.rows("light")[-1][1] == "off"


def test_a_unit_that_does_not_know_the_key_is_refused(unit: EmulatedUnit) -> None:
    with start_guard(config_for(unit, key=b"k" * 32)) as guard:
        with pytest.raises(GateTripped, match="proof-failed"):
            guard.arm(unit)
    assert unit.rows("light") == []


def test_the_emission_line_is_held_exclusively(
    unit: EmulatedUnit, lit: GuardClient
) -> None:
    with pytest.raises(LineBroke, match="emission line"):
        start_guard(config_for(unit))
    lit.check()


def test_a_ledger_that_cannot_be_written_refuses_the_start(unit: EmulatedUnit) -> None:
    (unit.log.parent / "ledger.jsonl").mkdir()
    with pytest.raises(GateRefused, match="ledger"):
        start_guard(config_for(unit))
    assert unit.rows("light") == []


def test_a_ledger_lost_on_the_way_means_dark(
    unit: EmulatedUnit, lit: GuardClient
) -> None:
    ledger = unit.log.parent / "ledger.jsonl"
    soon(lambda: verify(ledger).count == 2)  # started, armed: nothing is queued
    ledger.unlink()
    ledger.mkdir()
    lit.dark()
    lit.light_on(2, 10.0, 10.0, POWER_MW)
    assert lit.tripped.wait(LIMIT_S)
    assert lit.events[-1].event == "ledger-failed"
    assert dark_after(unit, time.monotonic()) < LATE_S


def test_the_guard_loads_no_numbers_pictures_or_settings_models() -> None:
    code = (
        "import sys, pitchsweep.safety.guard_process\n"
        "bad = {'numpy', 'cv2', 'scipy', 'pydantic', 'yaml', 'cryptography',"
        " 'matplotlib', 'typer', 'pitchsweep.configs', 'pitchsweep.analysis',"
        " 'pitchsweep.acquire', 'pitchsweep.drivers.twin'}\n"
        "print(sorted(bad & set(sys.modules)))"
    )
    said = subprocess.run(
        [sys.executable, "-c", code], check=True, capture_output=True, text=True
    )
    assert said.stdout.strip() == "[]"
