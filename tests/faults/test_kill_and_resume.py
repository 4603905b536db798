"""The real processes: killed or stopped once, dark in time, resumed to the same."""

import os
import signal
from pathlib import Path

import pytest
from faults.kill_and_resume import (
    STEP_KEPT,
    Outcome,
    acknowledged,
    check,
    kill_after_step,
    only_run,
    outcome,
    resume,
    start,
    wait_for_words,
    write_job,
)

from pitchsweep.acquire.journal_file import open_journal


@pytest.fixture(scope="module")
def whole(tmp_path_factory: pytest.TempPathFactory) -> Outcome:
    """What a sweep left alone gives; noise of repeated steps does not matter to it."""
    folder = tmp_path_factory.mktemp("whole")
    write_job(folder / "job.yaml", record="spots")
    process = start(folder / "job.yaml", folder / "runs")
    process.communicate()
    assert process.returncode == 0
    run = only_run(folder / "runs")
    assert run is not None
    return outcome(run)


def test_a_killed_or_stopped_sweep_goes_dark_and_resumes_to_the_same(
    tmp_path: Path, whole: Outcome
) -> None:
    job = tmp_path / "job.yaml"
    write_job(job, record="spots")
    victims = ("guard", "twin")
    killed_s = kill_after_step(job, tmp_path / "killed", 4, victims)
    run = only_run(tmp_path / "killed")
    assert run is not None and len(acknowledged(run)) >= 4
    check(run, killed_s, whole, also=victims, again_s=1.5)

    process = start(job, tmp_path / "stopped")
    wait_for_words(process, STEP_KEPT.format(2))
    os.kill(process.pid, signal.SIGTERM)
    _, said = process.communicate()
    if process.returncode == 0:
        pytest.skip("the sweep was over before the signal came")
    assert process.returncode == 5
    run = only_run(tmp_path / "stopped")
    assert run is not None
    assert said.rstrip().endswith(f"pitchsweep sweep --resume {run}")
    assert not (run / "run.db-wal").exists()
    with open_journal(run / "run.db", read_only=True) as journal:
        assert journal.sessions()[0][4] == "stopped: SIGTERM"
    resume(run)
    assert outcome(run) == whole


def test_fresh_noise_in_repeated_steps_leaves_the_pitch_within_its_uncertainty(
    tmp_path: Path, whole: Outcome
) -> None:
    job = tmp_path / "job.yaml"
    write_job(job, record="spots", repeated_noise="fresh")
    killed_s = kill_after_step(job, tmp_path / "killed", 5)
    run = only_run(tmp_path / "killed")
    assert run is not None
    check(run, killed_s, whole, fresh=True)
