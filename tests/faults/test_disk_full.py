"""A disk filled to the last byte in the middle of a step: a small one of its own."""

import os
import subprocess
from collections.abc import Iterator
from pathlib import Path

import pytest
from acquire_fakes import FakeBench, QuietProgress, opener, small_job

from pitchsweep.acquire import step_taker, sweep_session
from pitchsweep.acquire.acquire_errors import SweepStopped
from pitchsweep.acquire.journal_file import open_journal
from pitchsweep.acquire.run_table import read_run
from pitchsweep.acquire.sweep_session import resume_run, sweep_job

JOB = small_job(record="frames", exposures_ms=(2.0, 20.0), dark_every_steps=3)


@pytest.fixture
def small_disk(tmp_path: Path) -> Iterator[Path]:
    place = tmp_path / "disk"
    place.mkdir()
    mounted = subprocess.run(
        ["mount", "-t", "tmpfs", "-o", "size=3m", "tmpfs", str(place)],
        capture_output=True,
        check=False,
    )
    if mounted.returncode:
        pytest.skip("a disk of a given size needs the right to mount")
    yield place
    subprocess.run(["umount", "-l", str(place)], check=False)


def fill(disk: Path) -> Path:
    """Leaves not one byte free."""
    filler = disk / "filler"
    handle = os.open(filler, os.O_WRONLY | os.O_CREAT)
    size = 1 << 16
    while size:
        try:
            os.write(handle, b"x" * size)
        except OSError:
            size //= 2
    os.close(handle)
    return filler


@pytest.mark.parametrize("moment", ["expose 3.0", "light 4", "wait"])
def test_a_disk_filled_mid_step_stops_the_run_which_goes_on_later(
    small_disk: Path, moment: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    # Room is foretold from the free bytes: here it is to fill up all the same.
    for module in (step_taker, sweep_session):
        monkeypatch.setattr(module, "free_bytes", lambda folder: 10**12)
    fake = FakeBench(JOB)

    def filling(what: str) -> None:
        if what == moment and fake.calls > 30:
            fill(small_disk)

    fake.on_call = filling
    with pytest.raises(SweepStopped, match="make space on that disk"):
        sweep_job(JOB, small_disk, QuietProgress(), opener(fake))
    assert not fake.lit
    (run,) = [path for path in small_disk.iterdir() if path.is_dir()]
    with open_journal(run / "run.db", read_only=True) as journal:
        before = {r.step for r in journal.intents() if r.outcome == "done"}
    (small_disk / "filler").unlink()
    resume_run(run, QuietProgress(), opener(FakeBench(JOB)))
    record = read_run(run)
    assert len(record.steps) == record.planned
    assert before - {9, 10} <= {step.row.step for step in record.steps}
