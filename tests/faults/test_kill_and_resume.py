"""The real processes: killed or stopped once, dark in time, resumed to the same."""

import os
import signal
from pathlib import Path

import pytest
from faults.kill_and_resume import (
    acknowledged,
    check,
    kill_after_step,
    only_run,
    outcome,
    resume,
    start,
    write_job,
)

from pitchsweep.acquire.journal_file import open_journal


def test_a_killed_or_stopped_sweep_goes_dark_and_resumes_to_the_same(
    tmp_path: Path,
) -> None:
    job = tmp_path / "job.yaml"
    write_job(job, record="spots")
    process = start(job, tmp_path / "whole")
    process.communicate()
    assert process.returncode == 0
    whole_run = only_run(tmp_path / "whole")
    assert whole_run is not None
    whole = outcome(whole_run)

    killed_s = kill_after_step(job, tmp_path / "killed", 4)
    run = only_run(tmp_path / "killed")
    assert run is not None and len(acknowledged(run)) >= 4
    check(run, killed_s, whole)

    process = start(job, tmp_path / "stopped")
    assert process.stderr is not None
    for line in process.stderr:
        if line.startswith("step 2/"):
            os.kill(process.pid, signal.SIGTERM)
            break
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
