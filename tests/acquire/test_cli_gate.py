"""``ack`` and ``dark`` as a person calls them."""

import io
from collections.abc import Iterator
from pathlib import Path

import pytest
from builders import demo_job
from emulated_unit import EmulatedUnit
from port_builders import with_ports

from pitchsweep.acquire import ack_run
from pitchsweep.acquire.ack_run import AT_THE_BENCH, acknowledge_run
from pitchsweep.acquire.bench_session import open_twin_bench
from pitchsweep.acquire.cli import run
from pitchsweep.acquire.journal_file import create_journal, open_journal
from pitchsweep.acquire.progress import progress_for
from pitchsweep.acquire.run_folder import RunFolder, create_run_folder
from pitchsweep.acquire.sweep_session import resume_run
from pitchsweep.acquire.unacknowledged import refuse_unacknowledged
from pitchsweep.safety.ledger import Ledger, verify
from pitchsweep.safety.run_ack import why_run_is_not_acknowledged
from pitchsweep.safety.safety_errors import GateRefused


@pytest.fixture
def folder(tmp_path: Path) -> RunFolder:
    return create_run_folder(tmp_path, demo_job("shims-spots"))


@pytest.fixture
def unit(tmp_path: Path) -> Iterator[EmulatedUnit]:
    emulated = EmulatedUnit(tmp_path / "unit.log", bytes(32), line="real")
    yield emulated
    emulated.end()


def hardware_folder(tmp_path: Path, unit_port: str) -> RunFolder:
    """A run on a bench with ports whose unit is emulated on a pseudo-terminal."""
    unit = {"port": unit_port, "dialect": "emission-line"}
    return create_run_folder(tmp_path, with_ports(demo_job("shims-spots"), unit=unit))


def test_ack_of_a_twins_run_is_in_the_ledger_and_serves_once(
    folder: RunFolder, capsys: pytest.CaptureFixture[str]
) -> None:
    assert run(["ack", str(folder.path), "--name", "A. Person"]) == 0
    said = capsys.readouterr()
    assert "acknowledged by A. Person (reset input)" in said.out
    assert "no safety function" in said.out
    assert verify(folder.ledger).holds
    assert why_run_is_not_acknowledged(folder.ledger, folder.path.name) is None
    assert run(["ack", str(folder.path), "--name", "A. Person"]) == 0
    assert "already" in capsys.readouterr().out
    Ledger(folder.ledger).append("guard-started", {"run": folder.path.name})
    assert "nobody" in str(why_run_is_not_acknowledged(folder.ledger, folder.path.name))


def test_a_complete_run_has_nothing_to_acknowledge(
    folder: RunFolder, capsys: pytest.CaptureFixture[str]
) -> None:
    with create_journal(folder.journal) as journal:
        journal.end_session(journal.begin_session("me"), "stopped: SIGINT")
        journal.end_session(journal.begin_session("me"), "done")
    assert run(["ack", str(folder.path), "--name", "A. Person"]) == 2
    assert "complete: there is nothing to acknowledge" in capsys.readouterr().err
    assert not folder.ledger.exists()
    # A sweep that its schedule ended is not: going on counts as a trip.
    with open_journal(folder.journal) as journal:
        journal.set_meta("ended_early", "the schedule says to stop by 06:00Z")
    assert run(["ack", str(folder.path), "--name", "A. Person"]) == 0


def test_ack_needs_a_name(
    folder: RunFolder,
    capsys: pytest.CaptureFixture[str],
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr("sys.stdin.isatty", lambda: False, raising=False)
    assert run(["ack", str(folder.path)]) == 2
    assert "--name" in capsys.readouterr().err


def test_ack_of_no_run_is_refused(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert run(["ack", str(tmp_path), "--name", "A. Person"]) == 2
    assert "Traceback" not in capsys.readouterr().err


def test_on_hardware_somebody_has_to_press_reset(
    tmp_path: Path, unit: EmulatedUnit
) -> None:
    folder = hardware_folder(tmp_path, unit.port)
    with pytest.raises(GateRefused, match="pitchsweep ack"):
        refuse_unacknowledged(folder.ledger, folder.path.name, folder.path)
    said: list[str] = []

    def at_the_bench(text: str) -> None:
        said.append(text)
        unit.tell("reset")

    done = acknowledge_run(folder.path, "A. Person", at_the_bench)
    assert done.reason == "acknowledged by A. Person (reset input)"
    assert said == [AT_THE_BENCH]
    refuse_unacknowledged(folder.ledger, folder.path.name, folder.path)
    assert unit.rows("light") == []


def test_on_hardware_nobody_at_the_bench_means_no(
    tmp_path: Path, unit: EmulatedUnit, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(ack_run.await_person, "__defaults__", (0.3,))
    folder = hardware_folder(tmp_path, unit.port)
    with pytest.raises(GateRefused, match="press the reset input"):
        acknowledge_run(folder.path, "A. Person", lambda text: None)
    with pytest.raises(GateRefused, match="nobody"):
        refuse_unacknowledged(folder.ledger, folder.path.name, folder.path)


def test_a_hardware_run_without_ack_does_not_go_on(
    tmp_path: Path, unit: EmulatedUnit
) -> None:
    folder = hardware_folder(tmp_path, unit.port)
    with pytest.raises(GateRefused, match="pitchsweep ack"):
        resume_run(folder.path, progress_for(io.StringIO()), open_twin_bench)


def test_dark_where_nothing_runs_says_so(
    capsys: pytest.CaptureFixture[str],
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setenv("PITCHSWEEP_GUARDS", str(tmp_path / "none"))
    assert run(["dark"]) == 0
    assert "says nothing of light that others" in capsys.readouterr().out
