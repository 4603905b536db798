"""``attend`` as people use it: at a real terminal, and by the simulated person.

Real processes: twin, guard, controller; real time, since a hand is waited for.
"""

import json
import os
import pty
import re
import select
import signal
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

import pytest
from acquire_fakes import QuietProgress
from emulated_bench import EmulatedBench
from sign_off_builders import (
    PASSPHRASE,
    Office,
    good_answers,
    office,
    secret,
    work_of,
)
from twin_bench import short_job, unit_log

from pitchsweep.acquire.attended_bench import Place, open_attended_bench
from pitchsweep.acquire.attended_session import Noted, Terms, attended_session
from pitchsweep.acquire.bench_session import open_twin_bench
from pitchsweep.acquire.cli import run
from pitchsweep.acquire.stop_signals import StopSignals
from pitchsweep.acquire.sweep_plan import plan_sweep
from pitchsweep.acquire.sweep_session import sweep_job
from pitchsweep.configs.fingerprint import fingerprint
from pitchsweep.configs.frozen_job import freeze, plain_yaml
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.ports_model import CameraPort, Ports, SerialPort, StagePort
from pitchsweep.safety.people_store import read_people
from pitchsweep.safety.safety_errors import GateRefused

JOB = "demo:shims-spots"
LIMIT_S = 40.0


@pytest.fixture
def at(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Office:
    here = office(tmp_path)
    monkeypatch.setenv("PITCHSWEEP_HOME", str(here.home.folder))
    monkeypatch.chdir(tmp_path)
    return here


def lights(at: Office) -> list[str]:
    """The unit's own word on the light of the one session."""
    (twin,) = at.home.folder.glob("attended/*/twin")
    return [r["value"] for r in unit_log(twin) if r["what"] == "light"]


def test_from_nothing_to_light_at_night_under_a_power_read(
    at: Office, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    job = short_job()
    (tmp_path / "job.yaml").write_text(freeze(job))
    with_pass = ("--passphrase-file", secret(tmp_path))
    words = ("attend", "job.yaml", "--name", "bo", "--twin-person", "--json")
    assert run([*words, *with_pass]) == 0
    told = json.loads(capsys.readouterr().out)
    assert told["powers"][0]["value_mw"] == pytest.approx(0.9)
    assert lights(at) == ["on", "off"]
    answers = good_answers(work_of(job)).model_dump(exclude_none=True)
    answers["items"]["power"].pop("readings")
    (tmp_path / "answers.yaml").write_text(plain_yaml(answers))
    sign = ("signoff", "job.yaml", "--answers", "answers.yaml")
    assert run([*sign, *with_pass]) == 0
    assert run(["ledger", "verify"]) == 0
    folder = sweep_job(job, tmp_path / "runs", QuietProgress(), open_twin_bench)
    first = json.loads((folder.path / "ledger.jsonl").read_bytes().splitlines()[0])
    assert first["data"]["permit"] == "unattended"


class Terminal:
    """A person at a real terminal in front of the program."""

    def __init__(self, *words: str) -> None:
        self._person, program = pty.openpty()
        self.process = subprocess.Popen(
            [sys.executable, "-m", "pitchsweep.acquire", *words],
            stdin=program,
            stdout=program,
            stderr=program,
            start_new_session=True,
        )
        os.close(program)
        self.seen = ""

    def until(self, words: str, *, holding: bool = False) -> None:
        """Reads on until ``words`` were said, the space bar held meanwhile or not."""
        until_s, begin = time.monotonic() + LIMIT_S, len(self.seen)
        while not re.search(words, self.seen[begin:]):
            assert time.monotonic() < until_s, self.seen
            if holding:
                os.write(self._person, b" ")
            if select.select([self._person], [], [], 0.05)[0]:
                self.seen += os.read(self._person, 65536).decode()

    def hold(self, until: Callable[[], bool]) -> None:
        """Holds the space bar."""
        until_s = time.monotonic() + LIMIT_S
        while not until():
            assert time.monotonic() < until_s, self.seen
            os.write(self._person, b" ")
            time.sleep(0.05)
            if select.select([self._person], [], [], 0)[0]:
                self.seen += os.read(self._person, 65536).decode()

    def type(self, text: str) -> None:
        os.write(self._person, text.encode())

    def end(self) -> int:
        """Reads what is left; the exit code."""
        try:
            while data := os.read(self._person, 65536):
                self.seen += data.decode()
        except OSError:
            pass
        os.close(self._person)
        return self.process.wait(LIMIT_S)


def test_a_person_holds_types_what_the_meter_says_and_stops_it_by_ctrl_c(
    at: Office, tmp_path: Path
) -> None:
    job = short_job()
    (tmp_path / "job.yaml").write_text(freeze(job))
    secret(tmp_path)
    person = Terminal(
        "attend", "job.yaml", "--name", "ada", "--passphrase-file", "pass"
    )
    person.until("eyewear worn")
    person.type("density 2, worn\n")
    person.until("hold the space bar")
    person.until("dark")
    person.type("r")
    person.until("hold the key for at least|hold the key for 1")
    held_from_s = time.monotonic()
    person.until("LIGHT", holding=True)
    person.hold(lambda: time.monotonic() > held_from_s + 2.5)
    # The hand is off: it goes dark by itself, the program being asked for nothing.
    person.until("dark")
    person.type("r")
    person.until("power at the part")
    person.type("0.85\n")
    person.until("instrument")
    person.type("meter 7\n")
    person.until("calibration")
    person.type("2999-01-31\n")
    person.until("noted: red 0.85 mW")
    person.until("LIGHT", holding=True)
    person.process.send_signal(signal.SIGINT)
    assert person.end() == 5, person.seen
    people = read_people(at.home).people
    (reading,) = people.powers
    assert (reading.value_mw, reading.meter, reading.by) == (0.85, "meter 7", "ada")
    assert [a.ended for a in people.attended.values()] == ["stopped: SIGINT"]
    assert lights(at) == ["on", "off", "on", "off"]
    assert PASSPHRASE not in person.seen and "Traceback" not in person.seen


def test_on_a_bench_with_ports_the_door_is_moved_by_hand_and_the_key_holds(
    at: Office, tmp_path: Path
) -> None:
    bench = EmulatedBench(tmp_path / "bench", short_frames())

    def hears(text: str) -> None:
        if "open the door" in text:
            bench.open_interlock()
        if "close its door" in text:
            bench.close_interlock()

    job = bench.job()
    step = plan_sweep(job, fingerprint(job)).steps[0]
    place = Place(step.laser, step.step, step.stage_deg, 0.9)
    terms = Terms(job, (place,), at.keys["bo"], "technician", "density 2", 5.0)
    try:
        with attended_session(at.home, terms) as session, StopSignals() as stop:
            with open_attended_bench(session.request(stop, hears)) as opened:
                light = opened.light_at(place)
                with pytest.raises(GateRefused, match="no key press"):
                    light.light_on()
                light.press()
                light.light_on()
                assert light.lit
                until_s = time.monotonic() + LIMIT_S
                while light.lit and time.monotonic() < until_s:
                    light.still()
                    time.sleep(0.1)
                assert not light.lit
            session.note(Noted(place.laser, 0.8, "meter 7", "2999-01-31", 2.0))
        assert [value for _, value, _ in bench.rows("light")] == ["on", "off"]
        people = read_people(at.home).people
        assert [(p.simulated, p.by) for p in people.powers] == [(False, "bo")]
    finally:
        bench.end()


def short_frames() -> Job:
    job = short_job("real")
    quick = job.bench.stage.model_copy(update={"speed_deg_per_s": 720.0})
    recipe = job.recipe.model_copy(update={"record": "frames"})
    bench = job.bench.model_copy(update={"stage": quick})
    return job.model_copy(update={"bench": bench, "recipe": recipe})


@pytest.mark.parametrize(
    ("words", "code", "said"),
    [
        ((JOB, "--name", "ada"), 3, "this is no terminal"),
        ((JOB, "--name", "cy", "--twin-person"), 2, "may not hold an attended"),
        ((JOB, "--name", "mo", "--twin-person"), 2, "is not enrolled"),
        ((JOB, "--name", "ada", "--twin-person", "--laser", "x"), 3, "no laser 'x'"),
        ((JOB, "--name", "ada", "--twin-person", "--step", "99"), 3, "no step 99"),
        ((JOB, "--name", "ada", "--twin-person", "--minutes", "61"), 2, "--minutes"),
        (
            (JOB, "--name", "ada", "--twin-person", "--ceiling-mw", "0.5"),
            3,
            "may have 0.9 mW",
        ),
        (
            (JOB, "--name", "bo", "--twin-person", "--ceiling-mw", "2"),
            3,
            "--ceiling-by OFFICER",
        ),
        (
            (JOB, "--name", "bo", "--twin-person", "--ceiling-mw", "2")
            + ("--ceiling-by", "bo"),
            2,
            "only a safety officer may",
        ),
    ],
)
def test_what_is_refused_before_anything_is_entered(
    at: Office,
    capsys: pytest.CaptureFixture[str],
    words: tuple[str, ...],
    code: int,
    said: str,
) -> None:
    assert run(["attend", *words]) == code
    err = capsys.readouterr().err
    assert said in err and "Traceback" not in err
    assert read_people(at.home).entries == 3


def test_a_simulated_person_does_not_hold_a_real_benchs_key(
    at: Office, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    job = short_job()
    ports = Ports(
        stage=StagePort(port="/dev/null", dialect="rotary-line"),
        unit=SerialPort(port="/dev/zero", dialect="emission-line"),
        camera=CameraPort(by="usb-video", address="/dev/video0", pixel_format="Y16"),
    )
    bench = job.bench.model_copy(update={"twin": None, "ports": ports})
    recipe = job.recipe.model_copy(update={"record": "frames"})
    job = job.model_copy(update={"bench": bench, "recipe": recipe})
    (tmp_path / "job.yaml").write_text(freeze(job))
    assert run(["attend", "job.yaml", "--name", "ada", "--twin-person"]) == 3
    assert "no simulated person" in capsys.readouterr().err
