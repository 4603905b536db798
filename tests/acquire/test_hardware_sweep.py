"""A bench with ports, emulated: from the refusal of an unsigned job to a result.

Real processes: the emulated bench, guard, controller. Judged by the unit's own log.
"""

import json
import os
import signal
import threading
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest
from acquire_fakes import QuietProgress
from emulated_bench import EmulatedBench
from hardware_builders import emulated, heard, lit, program, twin_job
from port_builders import invented_ports
from sign_off_builders import Office, office, signed, work_of

from pitchsweep.acquire.ack_run import acknowledge_run
from pitchsweep.acquire.acquire_errors import JobRefused
from pitchsweep.acquire.hardware_bench import (
    hardware_opener,
    open_hardware_bench,
    refuse_same_device,
)
from pitchsweep.acquire.journal_file import create_journal, open_journal
from pitchsweep.acquire.run_folder import create_run_folder
from pitchsweep.acquire.run_permit import RunPermit
from pitchsweep.acquire.stop_signals import StopSignals
from pitchsweep.acquire.sweep_plan import plan_sweep
from pitchsweep.acquire.sweep_session import BenchRequest, resume_run, sweep_job
from pitchsweep.configs.fault_policies import FaultPolicies
from pitchsweep.configs.fingerprint import fingerprint
from pitchsweep.configs.frozen_job import freeze
from pitchsweep.configs.job_model import Job
from pitchsweep.drivers.dialect_files import shipped_dialect_mapping
from pitchsweep.drivers.driver_errors import DeviceRefused, LineBroke
from pitchsweep.safety.guard_client import start_guard
from pitchsweep.safety.guard_config import GuardConfig, GuardLimits, UnitSettings
from pitchsweep.safety.permit import RehearsalPermit
from pitchsweep.safety.permitted_steps import PermittedSteps
from pitchsweep.safety.safety_errors import GateRefused, GateTripped, SafetyError

KEPT_DARK_S = 1.0
"""From kill to dark: 0.25 s by the keep-alive; the rest for a busy machine."""


@pytest.fixture
def at(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Office:
    made = office(tmp_path)
    monkeypatch.setenv("PITCHSWEEP_HOME", str(made.home.folder))
    return made


@pytest.fixture(scope="module")
def standing(tmp_path_factory: pytest.TempPathFactory) -> Iterator[EmulatedBench]:
    with emulated(tmp_path_factory.mktemp("standing"), twin_job()) as bench:
        yield bench


def test_from_unsigned_to_signed_to_a_measured_result(
    tmp_path: Path, at: Office
) -> None:
    with emulated(tmp_path, twin_job(step_deg=9.0)) as bench:
        job = bench.job()
        (tmp_path / "job.yaml").write_text(freeze(job))
        with program(tmp_path, "sweep", "job.yaml") as unsigned:
            said = heard(unsigned, bench)
        assert unsigned.returncode == 3 and len(said) == 2
        assert "needs a sign-off, and it has none" in said[0]
        assert not (tmp_path / "runs").exists()
        signed(at, work_of(job))
        with program(tmp_path, "sweep", "job.yaml", "--json") as sweep:
            said = heard(sweep, bench)
            assert sweep.stdout is not None
            shown = sweep.stdout.read()
        assert sweep.returncode == 0, said
        result = json.loads(shown)
        off_nm = result["pitch_nm"] - bench.truth()["pitch_nm"]
        assert abs(off_nm) <= 3.0 * result["u_pitch_nm"]
        assert result["u_pitch_nm"] < 1e-3 * result["pitch_nm"]
        assert result["origin"] == "measured"
        assert lit(bench) == ["on", "off"] * 12  # the zero check and eleven steps
    (folder,) = (tmp_path / "runs").iterdir()
    assert not (folder / "twin").exists()
    page = (folder / "report.html").read_text()
    assert "Simulated bench" not in page and "sign-off" in page
    first = json.loads((folder / "ledger.jsonl").read_text().splitlines()[0])
    assert first["data"]["permit"] == "unattended"


def test_a_rehearsal_is_nothing_to_a_bench_with_ports(
    tmp_path: Path, at: Office
) -> None:
    with emulated(tmp_path, twin_job()) as bench:
        job = bench.job()
        folder = create_run_folder(tmp_path / "runs", job)
        with create_journal(folder.journal) as journal, StopSignals() as stop:
            plan = plan_sweep(job, fingerprint(job))
            rehearsal = BenchRequest(
                folder, plan, journal, stop, False, lambda _: None, RunPermit()
            )
            with pytest.raises(GateRefused, match="needs a sign-off"):
                with open_hardware_bench(rehearsal):
                    pass
        # Even if the controller were wrong: the guard asks the unit itself.
        now_s = time.time()
        words = shipped_dialect_mapping("emission-line")
        assert isinstance(words, dict)
        config = GuardConfig(
            unit=UnitSettings(bench.ports["unit"], 115200, words, "bench-unit-1", 200),
            permit=RehearsalPermit(bytes(32), now_s - 1.0, now_s + 60.0),
            limits=GuardLimits(),
            permitted=PermittedSteps({0: 0.0}, 0.01, 5.0, 0.9),
            ledger_path=str(tmp_path / "ledger.jsonl"),
            run="forged",
            resumed=False,
        )
        with start_guard(config) as guard:
            with pytest.raises(SafetyError, match="no proof of the twin"):
                guard.arm(bench)
        assert lit(bench) == []


def policies(**changes: str) -> FaultPolicies:
    return FaultPolicies.model_validate({"retries": 1, "then": "stop", **changes})


class WatchesSteps(QuietProgress):
    """Does something when so many steps are done."""

    def __init__(self, at_step: int, act: Callable[[], None]) -> None:
        super().__init__()
        self._at, self._act = at_step, act

    def show(self, shown: Any) -> None:
        super().show(shown)
        if shown.done == self._at:
            self._act()


def test_a_camera_lost_in_mid_run_is_met_by_policy_and_the_bench_is_dark(
    tmp_path: Path, at: Office
) -> None:
    with emulated(tmp_path, twin_job(faults=policies(camera_gone="retry"))) as bench:
        job = bench.job()
        signed(at, work_of(job))
        progress = WatchesSteps(2, lambda: bench.tell("unplug-camera"))
        with pytest.raises(LineBroke, match="Connection refused"):
            sweep_job(job, tmp_path / "runs", progress, hardware_opener(bench))
        assert lit(bench)[-1] == "off"
    (folder,) = (tmp_path / "runs").iterdir()
    with open_journal(folder / "run.db") as journal:
        faults = journal.faults()
    assert {fault.what for fault in faults} == {"camera gone"}
    assert [fault.policy for fault in faults] == [
        "retry, attempt 1 of 1",
        "stop, after 1 times retry",
    ]


def test_people_are_waited_for_dark_with_the_door_open_and_light_comes_back(
    tmp_path: Path, at: Office
) -> None:
    """Two mounts, a camera that needs a hand, two sensors: one run."""
    recipe = {
        "mounts_deg": (0.0, 180.0),
        "start_deg": -30.0,
        "stop_deg": 30.0,
        "faults": policies(camera_no_frame="pause"),
    }
    twin = twin_job(**recipe)
    sensors = {
        "air_sensor": {"name": "emulated", "u_temperature_C": 0.1},
        "power_sensor": {"name": "emulated"},
    }
    values = {**twin.bench.model_dump(), **sensors}
    twin = Job.model_validate({**twin.model_dump(), "bench": values})
    with emulated(tmp_path, twin) as bench:
        job = bench.job()
        signed(at, work_of(job))
        asked: list[tuple[float, str]] = []

        class Person(EmulatedBench):
            def __init__(self) -> None:
                self.process = bench.process

            def ask(self, what: str, check: Callable[[], None]) -> str:
                asked.append((time.monotonic(), what))
                bench.tell("camera")
                return bench.ask(what, check)

        progress = WatchesSteps(2, lambda: bench.tell("camera busy"))
        folder = sweep_job(job, tmp_path / "runs", progress, hardware_opener(Person()))
        first, second = asked
        assert first[1] == "look at the bench: camera no frame"
        assert second[1] == "seat the part for mount 2, 180 deg"
        doors = bench.rows("door")
        for moment_s, _ in asked:
            opened_s = next(s for s, how, _ in doors if how == "open" and s > moment_s)
            closed_s = next(
                s for s, how, _ in doors if how == "closed" and s > opened_s
            )
            light = [s for s, how, _ in bench.rows("light") if how == "on"]
            assert not [s for s in light if moment_s <= s <= closed_s]
            assert [s for s in light if s > closed_s]
    with open_journal(folder.journal) as journal:
        gate = [row for row in journal.gate_events() if row.event == "disarmed"]
        readings = journal.readings()
        persons = [row.detail for row in journal.gate_events() if row.event == "person"]
    assert len(gate) == 2 and len(persons) == 2
    assert readings and all(r.air_C is not None for r in readings.values())
    assert all(0.5 < (r.power_mw or 0.0) < 1.5 for r in readings.values())


def test_a_controller_killed_while_lit_leaves_the_unit_dark_and_ack_comes_first(
    tmp_path: Path, at: Office
) -> None:
    with emulated(
        tmp_path, twin_job(start_deg=-15.0, stop_deg=15.0, exposures_ms=(2.0, 400.0))
    ) as bench:
        job = bench.job()
        signed(at, work_of(job))
        (tmp_path / "job.yaml").write_text(freeze(job))
        with program(tmp_path, "sweep", "job.yaml") as sweep:
            thread = threading.Thread(target=heard, args=(sweep, bench))
            thread.start()
            while lit(bench).count("on") < 3 or lit(bench)[-1] != "on":
                assert sweep.poll() is None
                thread.join(0.01)
            killed_s = time.monotonic()
            os.killpg(sweep.pid, signal.SIGKILL)
            thread.join()
        while lit(bench)[-1] == "on":
            assert time.monotonic() < killed_s + 10.0
            thread.join(0.01)
        light = bench.rows("light")
        assert light[-1][0] - killed_s <= KEPT_DARK_S
        count = len(light)
        (folder,) = (tmp_path / "runs").iterdir()
        quiet = QuietProgress()
        with pytest.raises(GateRefused, match="ack"):
            resume_run(folder, quiet, hardware_opener(bench))
        assert len(bench.rows("light")) == count
        acknowledge_run(folder, "A. Person", lambda _: bench.tell("reset"))
        done = resume_run(folder, quiet, hardware_opener(bench))
        with open_journal(done.journal) as journal:
            intents = journal.intents()
        times_s = [row.bench_s for row in intents if row.bench_s is not None]
        assert times_s == sorted(times_s)
        assert lit(bench)[-1] == "off"


@pytest.mark.parametrize(
    ("changes", "error", "words"),
    [
        ({"emission": "unit_identity"}, GateTripped, "the unit is 'bench-unit-1'"),
        ({"stage": "identity"}, DeviceRefused, "'emulated-stage' answers, the bench"),
    ],
)
def test_a_stranger_at_a_port_is_not_taken_for_the_device(
    changes: dict[str, str],
    error: type[Exception],
    words: str,
    tmp_path: Path,
    at: Office,
    standing: EmulatedBench,
) -> None:
    job = standing.job()
    bench, ports = job.bench, job.bench.ports
    assert ports is not None
    if "emission" in changes:
        other = bench.emission.model_copy(update={"unit_identity": "another"})
        bench = bench.model_copy(update={"emission": other})
    else:
        stage = ports.stage.model_copy(update={"identity": "another"})
        ports = ports.model_copy(update={"stage": stage})
        bench = bench.model_copy(update={"ports": ports})
    job = job.model_copy(update={"bench": bench})
    signed(at, work_of(job))
    before = len(lit(standing))
    with pytest.raises(error, match=words):
        sweep_job(job, tmp_path, QuietProgress(), hardware_opener(standing))
    assert len(lit(standing)) == before


def test_a_stop_is_heard_while_the_door_is_waited_for(
    tmp_path: Path, at: Office, standing: EmulatedBench
) -> None:
    job = standing.job()
    signed(at, work_of(job))
    (tmp_path / "job.yaml").write_text(freeze(job))
    before = len(lit(standing))
    with program(tmp_path, "sweep", "job.yaml") as sweep:
        said = []
        assert sweep.stderr is not None
        for line in sweep.stderr:
            said.append(line)
            if "open the door" in line:
                os.kill(sweep.pid, signal.SIGINT)
    assert sweep.returncode == 5 and "stopped, dark: SIGINT" in "".join(said)
    assert len(lit(standing)) == before


def test_two_names_of_one_device_are_one_port(tmp_path: Path) -> None:
    (tmp_path / "by-id").symlink_to("/dev/zero")
    stage = {"port": str(tmp_path / "by-id"), "dialect": "rotary-line"}
    with pytest.raises(JobRefused, match="are the same device, /dev/zero"):
        refuse_same_device("job", invented_ports(stage=stage))
