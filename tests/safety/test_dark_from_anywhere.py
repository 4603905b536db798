"""Any terminal of the user makes a running guard dark, without knowing anything."""

import json
import os
import signal
import socket
import time
from collections.abc import Iterator
from pathlib import Path

import pytest
from emulated_unit import EmulatedUnit
from guard_builders import KEY, POWER_MW, guard_config

from pitchsweep.drivers.dialect_files import shipped_dialect_mapping
from pitchsweep.safety.file_watch import FileWatch, file_sha256
from pitchsweep.safety.guard_client import GuardClient, start_guard
from pitchsweep.safety.running_guards import (
    FOLDER_VARIABLE,
    GONE,
    RunningGuard,
    find_guards,
    guards_folder,
    own_folder,
    tell_dark,
)
from pitchsweep.safety.safety_errors import GateRefused, GateTripped


@pytest.fixture
def unit(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Iterator[EmulatedUnit]:
    monkeypatch.setenv(FOLDER_VARIABLE, str(tmp_path / "guards"))
    emulated = EmulatedUnit(tmp_path / "unit.log", KEY)
    yield emulated
    emulated.end()


def start(unit: EmulatedUnit, **changes: object) -> GuardClient:
    dialect = shipped_dialect_mapping("emission-line")
    assert isinstance(dialect, dict)
    config = guard_config(
        port=unit.port,
        dialect=dialect,
        ledger=unit.log.parent / "ledger.jsonl",
        utc_s=time.time(),
        **changes,  # type: ignore[arg-type]
    )
    return start_guard(config)


def test_a_lit_guard_is_found_told_and_dark(unit: EmulatedUnit) -> None:
    with start(unit) as guard:
        guard.arm(unit)
        guard.light_on(1, 0.0, 0.0, POWER_MW)
        found = find_guards()
        assert [(g.pid, g.run) for g in found] == [(guard.pid, "run-1")]
        answer = tell_dark(found[0])
        assert (answer.answered, answer.state, answer.light_on) == (
            True,
            "tripped",
            False,
        )
        assert unit.rows("light")[-1][1] == "off"
        with pytest.raises(GateTripped, match="hand-stop"):
            guard.light_on(1, 0.0, 0.0, POWER_MW)
    assert find_guards() == []
    assert list(guards_folder().iterdir()) == []


def test_a_guard_that_hangs_is_said_to_be_silent(unit: EmulatedUnit) -> None:
    with start(unit) as guard:
        os.kill(guard.pid, signal.SIGSTOP)
        answer = tell_dark(find_guards()[0], wait_s=0.2)
        os.kill(guard.pid, signal.SIGCONT)
        assert not answer.answered


def test_what_a_killed_guard_left_is_tidied_up(unit: EmulatedUnit) -> None:
    with start(unit) as guard:
        os.kill(guard.pid, signal.SIGKILL)
        assert guard.lost.wait(5.0)
        guard.stop()
        assert find_guards() == []
        assert list(guards_folder().iterdir()) == []


def test_another_process_of_the_same_number_is_no_guard(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv(FOLDER_VARIABLE, str(tmp_path))
    note = tmp_path / f"{os.getpid()}.json"
    note.write_text(json.dumps({"pid": os.getpid(), "run": "r", "unit": "u"}))
    left = socket.socket(socket.AF_UNIX)
    left.bind(str(note.with_suffix(".socket")))
    left.close()
    (guard,) = find_guards()
    assert tell_dark(guard).state == GONE
    assert not note.exists()


@pytest.mark.parametrize("text", ["", "{}", "[1]", '{"pid":"x"}'])
def test_an_unreadable_note_is_removed(tmp_path: Path, text: str) -> None:
    note = tmp_path / "1.json"
    note.write_text(text)
    assert find_guards(tmp_path) == []
    assert not note.exists()


def test_a_guard_that_nobody_could_stop_does_not_start(
    unit: EmulatedUnit, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    (tmp_path / "file").write_text("")
    monkeypatch.setenv(FOLDER_VARIABLE, str(tmp_path / "file"))
    with pytest.raises(GateRefused, match="folder"):
        start(unit)
    with pytest.raises(OSError):
        own_folder(tmp_path / "file")
    assert unit.rows("light") == []


def test_silence_of_a_socket_that_is_missing() -> None:
    gone = RunningGuard(1, "run", "unit", Path("/nowhere/1.socket"))
    assert tell_dark(gone).state == GONE


def test_a_watched_file_that_changes_means_dark(
    unit: EmulatedUnit, tmp_path: Path
) -> None:
    job = tmp_path / "job.yaml"
    job.write_text("power_mw: 0.9\n")
    with start(unit, watched={str(job): file_sha256(job)}) as guard:
        guard.arm(unit)
        guard.light_on(1, 0.0, 0.0, POWER_MW)
        job.write_text("power_mw: 9.0\n")
        assert guard.tripped.wait(5.0)
        with pytest.raises(GateTripped, match=r"settings-changed.*job\.yaml was chang"):
            guard.check()
    assert unit.rows("light")[-1][1] == "off"


def test_a_file_that_must_stay_absent_is_watched_too(tmp_path: Path) -> None:
    watched = {str(tmp_path / "revoked"): ""}
    assert FileWatch(watched).failure == ""
    (tmp_path / "revoked").write_text("x")
    assert "written" in FileWatch(watched).failure
    (tmp_path / "kept").write_text("x")
    kept = {str(tmp_path / "kept"): file_sha256(tmp_path / "kept")}
    (tmp_path / "kept").unlink()
    assert "removed" in FileWatch(kept).failure
