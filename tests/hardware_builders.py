"""Emulated benches with ports and programs that sweep them, for tests."""

import contextlib
import subprocess
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from builders import demo_job
from emulated_bench import EmulatedBench
from whole_sweep import PROGRAM

from pitchsweep.configs.job_model import Job


def twin_job(**recipe: Any) -> Job:
    """A short sweep of the shim with a small camera, in real time."""
    job = demo_job("shims")
    camera = job.bench.camera.model_copy(
        update={
            "width_px": 512,
            "height_px": 160,
            "mm_per_px": 0.78125,
            "centre_column_px": 255.5,
            "centre_row_px": 79.5,
            "readout_s": 0.0,
        }
    )
    stage = job.bench.stage.model_copy(
        update={"speed_deg_per_s": 720.0, "settle_s": 0.0}
    )
    return demo_job(
        "shims",
        twin={"speed": "real"},
        bench={"camera": camera, "stage": stage},
        recipe={"step_deg": 15.0, "exposures_ms": (2.0, 15.0), **recipe},
    )


@contextlib.contextmanager
def emulated(folder: Path, job: Job) -> Iterator[EmulatedBench]:
    bench = EmulatedBench(folder / "bench", job)
    try:
        yield bench
    finally:
        bench.end()


def program(folder: Path, *words: str) -> "subprocess.Popen[str]":
    return subprocess.Popen(
        [*PROGRAM, *words],
        cwd=folder,
        stdin=subprocess.DEVNULL,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        start_new_session=True,
    )


def heard(process: "subprocess.Popen[str]", bench: EmulatedBench) -> list[str]:
    """Everything said on stderr; the person at the bench does what is said there."""
    said = []
    assert process.stderr is not None
    for line in process.stderr:
        said.append(line)
        if "open the door" in line:
            bench.open_interlock()
        if "close its door" in line:
            bench.close_interlock()
    return said


def lit(bench: EmulatedBench) -> list[str]:
    return [value for _, value, _ in bench.rows("light")]
