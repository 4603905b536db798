"""Frames read out while the stage turns: what they gain and how their loss is met."""

import threading
import weakref
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from acquire_fakes import FakeBench, QuietProgress, opener, small_job
from numpy.typing import NDArray

from pitchsweep.acquire.journal_file import open_journal
from pitchsweep.acquire.run_table import read_run
from pitchsweep.acquire.sweep_session import sweep_job
from pitchsweep.drivers.devices import Label, ReadsOutLater
from pitchsweep.drivers.driver_errors import DriverError, NoAnswerInTime

JOB = small_job(record="frames", exposures_ms=(2.0, 20.0), dark_every_steps=3)
LAST = 1
"""The number of a step's last light exposure."""


class LaterBench(FakeBench):
    """Its camera says when the exposure is over; ``lose`` names frames not to come."""

    lose: frozenset[tuple[int, int]] = frozenset()

    def begin(
        self, exposure_ms: float, label: Label
    ) -> Callable[[], NDArray[np.uint16]]:
        frame = self.expose(exposure_ms, label)
        key = (label.step, label.exposure)
        lost = key in self.lose
        self.lose = self.lose - {key}

        def read_out() -> NDArray[np.uint16]:
            self.log.append(f"read {label.step}.{label.exposure}")
            if lost:
                raise NoAnswerInTime("camera", "expose", 1.0)
            return frame

        return read_out


def test_a_camera_that_reads_out_later_gives_the_same_run(tmp_path: Path) -> None:
    assert isinstance(LaterBench(JOB), ReadsOutLater)
    assert not isinstance(FakeBench(JOB), ReadsOutLater)
    plain = sweep_job(JOB, tmp_path / "a", QuietProgress(), opener(FakeBench(JOB)))
    later = sweep_job(JOB, tmp_path / "b", QuietProgress(), opener(LaterBench(JOB)))
    spots = [
        [(step.row.step, step.found) for step in read_run(folder.path).steps]
        for folder in (plain, later)
    ]
    assert spots[0] == spots[1]
    kept = [
        sorted(f.name for f in (x.path / "frames").iterdir()) for x in (plain, later)
    ]
    assert kept[0] == kept[1]


def test_the_stage_turns_on_before_the_last_frame_is_there_and_no_light_comes(
    tmp_path: Path,
) -> None:
    fake = LaterBench(JOB)
    moved = threading.Event()
    begin = fake.begin

    def waiting(exposure_ms: float, label: Label) -> Callable[[], NDArray[np.uint16]]:
        to_come = begin(exposure_ms, label)
        if (label.step, label.exposure) != (4, LAST):
            return to_come
        moved.clear()

        def read_out() -> NDArray[np.uint16]:
            assert moved.wait(30.0), "the stage waited for the readout"
            return to_come()

        return read_out

    fake.begin = waiting  # type: ignore[method-assign]
    fake.on_call = lambda what: moved.set() if what == "move" else None
    sweep_job(JOB, tmp_path, QuietProgress(), opener(fake))
    assert fake.log.index("read 4.1") < fake.log.index("light 5")
    assert fake.lit_moves == 0


@pytest.mark.parametrize("exposure", [0, LAST, 2])
def test_a_frame_that_does_not_come_is_met_as_the_recipe_says(
    tmp_path: Path, exposure: int
) -> None:
    fake = LaterBench(JOB)
    fake.lose = frozenset({(3, exposure)})
    progress = QuietProgress()
    folder = sweep_job(JOB, tmp_path, progress, opener(fake))
    record = read_run(folder.path)
    assert [step.row.step for step in record.steps] == list(range(record.planned))
    with open_journal(folder.journal, read_only=True) as journal:
        tries = [row.outcome for row in journal.intents() if row.step == 3]
        (fault,) = [row for row in journal.faults() if row.step == 3]
    assert tries == ["failed", "done"]
    assert fault.what == "camera no frame" and fault.policy.startswith("retry")
    assert any("camera no frame at step 3" in text for text in progress.said)


def test_a_last_frame_that_never_comes_ends_the_sweep_where_the_recipe_says_stop(
    tmp_path: Path,
) -> None:
    job = small_job(record="frames", exposures_ms=(2.0, 20.0))
    faults = job.recipe.faults.model_copy(update={"camera_no_frame": "stop"})
    recipe = job.recipe.model_copy(update={"faults": faults})
    job = job.model_copy(update={"recipe": recipe})
    fake = LaterBench(job)
    fake.lose = frozenset({(8, LAST)})  # the last step of all
    with pytest.raises(DriverError, match="camera"):
        sweep_job(job, tmp_path, QuietProgress(), opener(fake))
    assert not fake.lit
    (run,) = tmp_path.glob("*/run.db")
    with open_journal(run, read_only=True) as journal:
        rows = {row.step: row.outcome for row in journal.intents() if row.step <= 8}
    assert rows == {**{step: "done" for step in range(8)}, 8: "failed"}


def test_frames_in_memory_do_not_grow_with_the_sweep(tmp_path: Path) -> None:
    # Being taken, waiting, being kept, read out last: two each, four with darks; and
    # the dark frames that serve until the next come.
    most = 4 * 4 + 2
    job = small_job(
        record="frames", exposures_ms=(2.0, 20.0), step_deg=1.0, dark_every_steps=5
    )
    fake = LaterBench(job)
    alive, highest, taken = 0, 0, 0
    lock = threading.Lock()
    expose = fake.expose

    def gone() -> None:
        nonlocal alive
        with lock:
            alive -= 1

    def counted(exposure_ms: float, label: Label) -> NDArray[np.uint16]:
        nonlocal alive, highest, taken
        frame = expose(exposure_ms, label)
        weakref.finalize(frame, gone)
        with lock:
            alive, taken = alive + 1, taken + 1
            highest = max(highest, alive)
        return frame

    fake.expose = counted  # type: ignore[method-assign]
    sweep_job(job, tmp_path, QuietProgress(), opener(fake))
    assert taken > 90 and highest <= most
