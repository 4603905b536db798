"""The sweep on a bench of values: killed at every call of any device, then resumed."""

import errno
import sqlite3
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from acquire_fakes import FakeBench, Killed, QuietProgress, opener, small_job
from port_builders import with_ports

from pitchsweep.acquire.acquire_errors import RunRefused, SweepStopped
from pitchsweep.acquire.fit_input import FitInput
from pitchsweep.acquire.journal_file import open_journal
from pitchsweep.acquire.run_lock import take_run_lock
from pitchsweep.acquire.run_table import input_from_run, read_run
from pitchsweep.acquire.sweep_session import resume_run, sweep_job
from pitchsweep.analysis.order_table_file import write_order_table
from pitchsweep.configs.fault_policies import FaultPolicies
from pitchsweep.configs.job_model import Job
from pitchsweep.drivers.driver_errors import NoAnswerInTime
from pitchsweep.safety.safety_errors import GateRefused, GateTripped


def swept(job: Job, runs: Path, fake: FakeBench) -> Path:
    return sweep_job(job, runs, QuietProgress(), opener(fake)).path


def outcome(run: Path) -> tuple[str, dict[str, str]]:
    """The order table and the checksum of every valid frame, as they will be judged."""
    record = read_run(run)
    table = write_order_table(input_from_run(record).table)
    frames = {file: sha for step in record.steps for file, sha, _ in step.frames}
    return table, frames


def only_run(runs: Path) -> Path:
    (run,) = runs.iterdir()
    return run


def acknowledged(run: Path) -> list[int]:
    with open_journal(run / "run.db", read_only=True) as journal:
        return [
            row.intent
            for row in journal.intents()
            if row.outcome == "done" and row.kind == "step"
        ]


SPOTS = small_job(mounts_deg=(0.0, 90.0), start_deg=-10.0, stop_deg=10.0, step_deg=10.0)
FRAMES = small_job(
    record="frames",
    start_deg=-15.0,
    stop_deg=15.0,
    step_deg=10.0,
    exposures_ms=(2.0, 20.0),
    dark_every_steps=2,
)


def calls_of(job: Job, tmp_path: Path) -> tuple[int, tuple[str, dict[str, str]]]:
    fake = FakeBench(job)
    run = swept(job, tmp_path / "whole", fake)
    return fake.calls, outcome(run)


@pytest.mark.parametrize("job", [SPOTS, FRAMES], ids=["spots", "frames"])
def test_killed_at_every_call_and_resumed_the_outcome_is_the_same(
    tmp_path: Path, job: Job
) -> None:
    calls, whole = calls_of(job, tmp_path)
    assert calls > 30 and whole[0].count("\n") > 5
    for n in range(1, calls + 1):
        runs = tmp_path / f"n{n}"
        with pytest.raises(Killed):
            swept(job, runs, FakeBench(job, fail_at=n))
        run = only_run(runs)
        before = acknowledged(run)
        fake = FakeBench(job)
        resume_run(run, QuietProgress(), opener(fake))
        assert outcome(run) == whole, f"killed at call {n}"
        assert set(before) <= set(acknowledged(run))
        assert fake.resumed in (True, None)


def test_killed_twice_running_the_outcome_is_the_same(tmp_path: Path) -> None:
    calls, whole = calls_of(FRAMES, tmp_path)
    runs = tmp_path / "twice"
    with pytest.raises(Killed):
        swept(FRAMES, runs, FakeBench(FRAMES, fail_at=calls // 2))
    run = only_run(runs)
    for n in (2, 9, 14):
        with pytest.raises(Killed):
            resume_run(run, QuietProgress(), opener(FakeBench(FRAMES, fail_at=n)))
    resume_run(run, QuietProgress(), opener(FakeBench(FRAMES)))
    assert outcome(run) == whole


def test_spots_lost_between_acknowledging_and_finding_are_found_again(
    tmp_path: Path,
) -> None:
    _, whole = calls_of(FRAMES, tmp_path)
    run = only_run(tmp_path / "whole")
    with sqlite3.connect(run / "run.db") as other:
        other.execute("DELETE FROM spots")
        other.execute("DELETE FROM spot_searches")
    other.close()
    assert outcome(run) == whole


def test_the_stage_never_moves_lit_and_everything_ends_dark(tmp_path: Path) -> None:
    fake = FakeBench(FRAMES)
    swept(FRAMES, tmp_path, fake)
    assert fake.lit_moves == 0 and not fake.lit
    assert fake.log[-2:] == ["end", "closed"]


def test_each_mount_begins_with_a_zero_check(tmp_path: Path) -> None:
    fake = FakeBench(SPOTS)
    swept(SPOTS, tmp_path, fake)
    steps = [int(w.split()[1]) for w in fake.log if w.startswith("spots")]
    assert steps == [6, 0, 1, 2, 7, 3, 4, 5]
    assert fake.log.index("seat 1") < fake.log.index("spots 7")


def test_a_zero_order_elsewhere_trips_before_the_first_step(tmp_path: Path) -> None:
    fake = FakeBench(SPOTS, shift_mm=-60.0)
    with pytest.raises(GateTripped, match="not where predicted"):
        swept(SPOTS, tmp_path, fake)
    assert fake.trips and not any(w == "spots 0" for w in fake.log)
    with open_journal(only_run(tmp_path) / "run.db", read_only=True) as journal:
        assert "not where predicted" in journal.faults()[0].detail
        assert str(journal.sessions()[0][4]).startswith("tripped")


def test_a_zero_order_lost_on_the_way_trips(tmp_path: Path) -> None:
    fake = FakeBench(small_job(step_deg=1.0, start_deg=6.0, stop_deg=16.0))

    def fall(what: str) -> None:
        if what == "light 3":
            fake.shift_mm = 500.0

    fake.on_call = fall
    with pytest.raises(GateTripped, match="lost in 2 exposures"):
        swept(fake.job, tmp_path, fake)


def test_a_device_fault_that_stays_ends_the_run_which_goes_on_later(
    tmp_path: Path,
) -> None:
    job = small_job(
        mounts_deg=(0.0, 90.0),
        start_deg=-10.0,
        stop_deg=10.0,
        step_deg=10.0,
        faults=FaultPolicies(stage_no_answer="stop"),
    )
    fake = FakeBench(
        job, fail_at=20, failure=lambda: NoAnswerInTime("stage", "where", 2.0)
    )
    with pytest.raises(NoAnswerInTime):
        swept(job, tmp_path, fake)
    run = only_run(tmp_path)
    resume_run(run, QuietProgress(), opener(FakeBench(job)))
    record = read_run(run)
    assert len(record.steps) == record.planned
    (fault,) = record.faults
    assert "did not answer" in fault.detail and fault.policy == "stop"
    assert any("did not answer" in w for w in input_from_run(record).warnings)


@pytest.mark.parametrize(
    "failure",
    [
        lambda: OSError(errno.ENOSPC, "No space left on device"),
        lambda: sqlite3.OperationalError("database or disk is full"),
    ],
)
def test_a_full_disk_stops_the_run_resumably(
    tmp_path: Path, failure: Callable[[], BaseException]
) -> None:
    fake = FakeBench(SPOTS, fail_at=20, failure=failure)
    with pytest.raises(SweepStopped, match="--resume"):
        swept(SPOTS, tmp_path, fake)


def test_a_stop_request_ends_the_sweep_dark_and_resumable(tmp_path: Path) -> None:
    fake = FakeBench(SPOTS)
    requests: list[Any] = []

    def ask(what: str) -> None:
        if what == "spots 2":
            requests[0].stop.request("SIGTERM")

    fake.on_call = ask
    inner = opener(fake)

    def open_bench(request: Any) -> Any:
        requests.append(request)
        return inner(request)

    with pytest.raises(SweepStopped, match="SIGTERM"):
        sweep_job(SPOTS, tmp_path, QuietProgress(), open_bench)
    run = only_run(tmp_path)
    # The step under way when it came is not acknowledged.
    assert len(acknowledged(run)) == 2 and not fake.lit
    with open_journal(run / "run.db", read_only=True) as journal:
        assert journal.sessions()[0][4] == "stopped: SIGTERM"


def test_a_complete_run_needs_no_bench_to_resume(tmp_path: Path) -> None:
    run = swept(SPOTS, tmp_path, FakeBench(SPOTS))
    fake = FakeBench(SPOTS)
    resume_run(run, QuietProgress(), opener(fake))
    assert fake.calls == 0


def test_a_run_in_use_is_refused_naming_its_owner(tmp_path: Path) -> None:
    run = swept(SPOTS, tmp_path, FakeBench(SPOTS))
    lock = take_run_lock(run)
    with pytest.raises(RunRefused, match="pid .* on .* since"):
        resume_run(run, QuietProgress(), opener(FakeBench(SPOTS)))
    lock.release()
    resume_run(run, QuietProgress(), opener(FakeBench(SPOTS)))


def test_a_changed_job_file_is_refused(tmp_path: Path) -> None:
    run = swept(SPOTS, tmp_path, FakeBench(SPOTS))
    text = (run / "job.yaml").read_text()
    (run / "job.yaml").write_text(text.replace("serial: ", "serial: x #", 1))
    with pytest.raises(RunRefused, match="not the job"):
        resume_run(run, QuietProgress(), opener(FakeBench(SPOTS)))


def test_a_bench_with_ports_is_refused_before_a_folder_is_made(tmp_path: Path) -> None:
    with pytest.raises(GateRefused, match="ports"):
        swept(with_ports(SPOTS), tmp_path, FakeBench(SPOTS))
    assert not list(tmp_path.iterdir())


def test_progress_counts_up_and_time_left_down(tmp_path: Path) -> None:
    progress = QuietProgress()
    sweep_job(SPOTS, tmp_path, progress, opener(FakeBench(SPOTS)))
    assert [s.done for s in progress.shown] == list(range(1, 7))
    left = [s.left_s for s in progress.shown]
    assert left == sorted(left, reverse=True) and left[-1] == 0.0


def test_an_incomplete_run_says_so(tmp_path: Path) -> None:
    with pytest.raises(Killed):
        swept(SPOTS, tmp_path, FakeBench(SPOTS, fail_at=30))
    given: FitInput = input_from_run(read_run(only_run(tmp_path)))
    assert any("incomplete" in warning for warning in given.warnings)
