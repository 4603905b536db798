"""Resident memory of the controller over a night of large frames.

Run: python tests/benchmarks/night_memory.py [FRAMES] (5000)
Frames of 5 megapixels whose noise the twin made before, taken as fast as twin, disk
and spot finder go; of the files only the last hundred are kept. Prints the memory until
a hundred frames are kept, and its least, middle and most after that.
"""

import subprocess
import sys
import tempfile
import time
from dataclasses import dataclass
from pathlib import Path

from sweep_overhead import resident_mb, stated_job

from pitchsweep.acquire.sweep_plan import plan_sweep
from pitchsweep.configs.fingerprint import fingerprint
from pitchsweep.configs.frozen_job import freeze
from pitchsweep.configs.job_model import Job

KEPT_FILES = 100
FRAMES_A_STEP = 2.2
"""Two exposures, and two dark frames every ten steps."""


@dataclass(frozen=True)
class Seen:
    """Memory of the controller once so many frames were kept."""

    frames: int
    resident_mb: float


def night_job(frames: int) -> Job:
    """The sweep of ``sweep_overhead`` in fine steps, in rehearsal."""
    job = stated_job(3)
    assert job.bench.twin is not None
    twin = job.bench.twin.model_copy(update={"speed": "rehearsal"})
    steps = round(frames / FRAMES_A_STEP)
    step_deg = 116.0 / max(steps - 1, 1)
    recipe = job.recipe.model_copy(
        update={
            "start_deg": -58.0,
            "stop_deg": -58.0 + (steps - 0.5) * step_deg,
            "step_deg": step_deg,
        }
    )
    bench = job.bench.model_copy(update={"twin": twin})
    return job.model_copy(update={"bench": bench, "recipe": recipe})


def watch(process: "subprocess.Popen[str]", runs: Path, wanted: int) -> list[Seen]:
    """Samples until the process ends; removes all but the last frames meanwhile."""
    seen, count = [], 0
    while process.poll() is None:
        time.sleep(0.2)
        files = sorted(runs.glob("*/frames/[0-9]*"))
        # Those of zero checks and repeated steps bear higher numbers.
        numbers = [int(path.stem) for path in files if int(path.stem) < wanted]
        for path in files[: len(numbers)][:-KEPT_FILES]:
            path.unlink()
        count = max([count, *(number + 1 for number in numbers)])
        seen.append(Seen(count, resident_mb(process.pid)))
    return seen


def main() -> int:
    """Sweeps once and prints the figures."""
    frames = int(sys.argv[1]) if len(sys.argv) > 1 else 5000
    with tempfile.TemporaryDirectory() as folder, tempfile.TemporaryFile("w+") as said:
        job = night_job(frames)
        wanted = plan_sweep(job, fingerprint(job)).frames
        (Path(folder) / "job.yaml").write_text(freeze(job))
        began_s = time.monotonic()
        process = subprocess.Popen(
            [sys.executable, "-m", "pitchsweep.acquire", "sweep", "job.yaml"],
            cwd=folder,
            stdout=subprocess.DEVNULL,
            stderr=said,
            text=True,
        )
        seen = watch(process, Path(folder) / "runs", wanted)
        said.seek(0)
        end = said.read()[-500:]
    wall_s = time.monotonic() - began_s
    last = max(item.frames for item in seen)
    # Afterwards the same number of frames stands there: that is the fit.
    sweep = [item for item in seen if KEPT_FILES <= item.frames < last]
    if not sweep:
        print(f"exit code {process.returncode} after {last} frames: {end}")
        return 1
    # The report after the sweep wants pictures of frames that are gone: no matter.
    whole = "sweep complete" in end
    if not whole:
        print(f"ended early, exit code {process.returncode}: {end}")
    after = [item.resident_mb for item in sweep]
    tenth = max(len(after) // 10, 1)
    tenths = [sorted(after[i : i + tenth]) for i in range(0, len(after), tenth)]
    print(f"{last} frames in {wall_s:.0f} s; resident memory of the controller:")
    first = max(item.resident_mb for item in seen if item.frames <= KEPT_FILES)
    print(f"at most {first:.0f} MB up to {KEPT_FILES} frames, after that ")
    print(f"{min(after):.0f} to {max(after):.0f} MB; tenth by tenth of the night")
    print("median: " + ", ".join(f"{part[len(part) // 2]:.0f}" for part in tenths))
    print("most:   " + ", ".join(f"{part[-1]:.0f}" for part in tenths))
    return 0 if whole else 1


if __name__ == "__main__":
    sys.exit(main())
