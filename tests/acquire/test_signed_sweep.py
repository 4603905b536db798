"""A sweep on the simulated bench under a sign-off, from the command line to its light.

Real processes: twin, guard, controller.
"""

import json
import sys
from pathlib import Path

import pytest
from acquire_fakes import QuietProgress
from sign_off_builders import office, signed, work_of
from twin_bench import short_job

from pitchsweep.acquire.bench_session import open_twin_bench
from pitchsweep.acquire.journal_file import open_journal
from pitchsweep.acquire.ledger_verbs import verify_ledgers
from pitchsweep.acquire.progress import progress_for
from pitchsweep.acquire.sweep_session import sweep_job
from pitchsweep.acquire.watched_sources import sources_of, watching
from pitchsweep.configs.frozen_job import freeze
from pitchsweep.configs.reader import read_job
from pitchsweep.safety.people_store import read_people
from pitchsweep.safety.safety_errors import GateRefused, GateTripped
from pitchsweep.safety.sign_off_store import revoke


def test_light_under_a_sign_off_is_recorded_everywhere(
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
) -> None:
    at, job = office(tmp_path), short_job()
    monkeypatch.setenv("PITCHSWEEP_HOME", str(at.home.folder))
    kept = signed(at, work_of(job))
    number = kept.record.statement.id
    folder = sweep_job(
        job, tmp_path / "runs", progress_for(sys.stderr), open_twin_bench
    )
    assert f"rehearsed sign-off {number}" in capsys.readouterr().err
    first = json.loads((folder.path / "ledger.jsonl").read_bytes().splitlines()[0])
    assert first["data"]["permit"] == "unattended"
    rows = map(json.loads, (folder.twin / "unit.log").read_text().splitlines())
    assert [r["value"] for r in rows if r["what"] == "light"].count("on") >= 5
    with open_journal(folder.journal) as journal:
        meta = journal.meta()
    assert meta["sign_off"] == number and "ada as safety-officer" in meta["permit"]
    ended = read_people(at.home).people.runs[folder.path.name]
    assert (ended["ending"], ended["head"]) == ("complete", meta["ledger_head"])
    assert verify_ledgers([folder.path], as_json=False)[0]


def test_a_sign_off_revoked_before_arming_keeps_the_bench_dark(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    at, job = office(tmp_path), short_job()
    monkeypatch.setenv("PITCHSWEEP_HOME", str(at.home.folder))
    kept = signed(at, work_of(job))

    class RevokesWhenItBegins:
        """Somebody revokes after the controller has looked, before the guard does."""

        def say(self, text: str) -> None:
            if "starting the simulated bench" in text:
                revoke(at.home, kept.record.statement.id, name="cy", reason="smoke")

        def show(self, shown: object) -> None:
            raise AssertionError("a step was made")

        def end(self) -> None:
            return

    with pytest.raises(GateRefused, match="revoked by cy"):
        sweep_job(job, tmp_path / "runs", RevokesWhenItBegins(), open_twin_bench)
    (run,) = (tmp_path / "runs").iterdir()
    log = (run / "twin" / "unit.log").read_text()
    assert '"on"' not in "".join(x for x in log.splitlines() if '"light"' in x)
    assert read_people(at.home).people.runs[run.name]["ending"] == "GateRefused"


def test_the_job_s_own_file_edited_while_it_runs_makes_it_dark(tmp_path: Path) -> None:
    """As the run's frozen copy does, which the guard watches too."""
    original = tmp_path / "mine.yaml"
    job = short_job("real")
    quick = job.bench.stage.model_copy(update={"speed_deg_per_s": 360.0})
    bench = job.bench.model_copy(update={"stage": quick})
    original.write_text(freeze(job.model_copy(update={"bench": bench})))
    opened = watching(open_twin_bench, sources_of(read_job(original)))

    class EditsDuringTheSweep(QuietProgress):
        """Somebody adds a remark once the first step is done."""

        def show(self, shown: object) -> None:
            with original.open("a") as file:
                file.write("# another thought\n")

    job = read_job(original).job
    with pytest.raises(
        GateTripped, match=r"mine.yaml was changed since the start"
    ) as trip:
        sweep_job(job, tmp_path / "runs", EditsDuringTheSweep(), opened)
    assert trip.value.event == "settings-changed"
    (run,) = (tmp_path / "runs").iterdir()
    rows = map(json.loads, (run / "twin" / "unit.log").read_text().splitlines())
    lights = [r["value"] for r in rows if r["what"] == "light"]
    assert lights[0] == "on" and lights[-1] == "off"
