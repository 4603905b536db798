"""Wall time of a sweep over what motion, settling, exposure and readout take.

Run: python tests/benchmarks/sweep_overhead.py [STEPS] (121)
Steps of 1 degree at 10 deg/s, settling 0.25 s, exposures 20 and 200 ms, a dark bracket
every 10 steps, readout 30 ms, frames of 5 megapixels whose noise the twin made before;
the twin at real speed. Timed from the second step's intent to the last acknowledgement
in the journal; before it come homing, the zero check and the way to the first angle.
Prints resident memory too.
"""

import sqlite3
import subprocess
import sys
import tempfile
import time
from datetime import datetime
from pathlib import Path

from pitchsweep.acquire.sweep_plan import plan_sweep
from pitchsweep.configs.fingerprint import fingerprint
from pitchsweep.configs.frozen_job import freeze
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.reader import read_job


def stated_job(steps: int) -> Job:
    """The sweep of the figure, on the shipped bench."""
    job = read_job("demo:shims").job
    assert job.bench.twin is not None
    camera = job.bench.camera.model_copy(
        update={
            "width_px": 2448,
            "height_px": 2048,
            "mm_per_px": 0.165,
            "centre_column_px": 1223.5,
            "centre_row_px": 1023.5,
        }
    )
    twin = job.bench.twin.model_copy(update={"speed": "real", "frames": "prepared"})
    stage = job.bench.stage.model_copy(update={"approach_deg": 0.5})
    bench = job.bench.model_copy(
        update={"camera": camera, "twin": twin, "stage": stage}
    )
    half = (steps - 1) / 2.0
    recipe = job.recipe.model_copy(
        update={
            "start_deg": -half,
            "stop_deg": half,
            "step_deg": 1.0,
            "angle_order": "up",
            "exposures_ms": (20.0, 200.0),
            "dark_every_steps": 10,
        }
    )
    return job.model_copy(update={"bench": bench, "recipe": recipe})


def resident_mb(pid: int) -> float:
    """Resident memory of a process, from /proc."""
    for line in Path(f"/proc/{pid}/status").read_text().splitlines():
        if line.startswith("VmRSS"):
            return int(line.split()[1]) / 1024.0
    return 0.0


def main() -> int:
    """Sweeps once and prints the figures."""
    steps = int(sys.argv[1]) if len(sys.argv) > 1 else 121
    job = stated_job(steps)
    plan = plan_sweep(job, fingerprint(job))
    with tempfile.TemporaryDirectory() as folder:
        (Path(folder) / "job.yaml").write_text(freeze(job))
        process = subprocess.Popen(
            [sys.executable, "-m", "pitchsweep.acquire", "sweep", "job.yaml"],
            cwd=folder,
            stdout=subprocess.DEVNULL,
            stderr=subprocess.PIPE,
            text=True,
        )
        memory = []
        while process.poll() is None:
            memory.append(resident_mb(process.pid))
            time.sleep(1.0)
        assert process.stderr is not None
        said = process.stderr.read()
        (run,) = (Path(folder) / "runs").iterdir()
        rows = (
            sqlite3.connect(run / "run.db")
            .execute(
                "SELECT i.utc, o.utc FROM intents i JOIN outcomes o USING (intent) "
                "WHERE i.kind = 'step' AND o.outcome = 'done' ORDER BY i.intent"
            )
            .fetchall()
        )
    if len(rows) != steps:
        print(said)
        return 1
    # The way to the first step is not that of the plan, which begins on it.
    begun = datetime.fromisoformat(rows[1][0])
    wall_s = (datetime.fromisoformat(rows[-1][1]) - begun).total_seconds()
    bare_s = plan.duration_s - plan.steps[1].planned_s
    print(f"{steps} steps: wall {wall_s:.1f} s, motion + settle + exposure + readout ")
    print(f"{bare_s:.1f} s, ratio {wall_s / bare_s:.3f}, ", end="")
    print(f"overhead {1000 * (wall_s - bare_s) / (steps - 1):.0f} ms a step")
    print(f"resident memory of the controller: at most {max(memory):.0f} MB")
    return 0


if __name__ == "__main__":
    sys.exit(main())
