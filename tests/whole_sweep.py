"""Runs the program as its user does: a whole sweep in an empty folder, its truth."""

import json
import shutil
import subprocess
import sys
import tempfile
import time
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from pitchsweep.configs.frozen_job import freeze
from pitchsweep.configs.job_model import Job

PROGRAM = [sys.executable, "-m", "pitchsweep.acquire"]


@dataclass(frozen=True)
class WholeSweep:
    """What one sweep left: exit code, result, truth, orders, what ``fit`` says later.

    ``refit`` is the result of ``fit RUN`` after the twin's folder was deleted, None
    if it was not asked for or failed.
    """

    exit_code: int
    said: str
    wall_s: float
    result: dict[str, Any]
    truth: dict[str, Any]
    orders_csv: str
    refit: dict[str, Any] | None

    @property
    def off_in_u(self) -> float:
        off = self.result["pitch_nm"] - self.truth["pitch_nm"]
        return float(off / self.result["u_pitch_nm"])

    @property
    def relative_u(self) -> float:
        return float(self.result["u_pitch_nm"] / self.result["pitch_nm"])


def whole_sweep(job: str | Job, seed: int, *, refit: bool = False) -> WholeSweep:
    """``pitchsweep sweep`` of a shipped job (its name) or of a changed one."""
    with tempfile.TemporaryDirectory() as folder:
        place = f"demo:{job}"
        if isinstance(job, Job):
            place = "job.yaml"
            Path(folder, place).write_text(freeze(job))
        start = time.monotonic()
        done = _program(folder, "sweep", place, "--twin-seed", str(seed), "--json")
        wall_s = time.monotonic() - start
        run = next(Path(folder, "runs").iterdir(), None)
        assert run is not None, done.stderr
        truth = json.loads((run / "twin" / "twin_truth.json").read_text())
        orders, again = run / "orders.csv", None
        orders_csv = orders.read_text() if orders.exists() else ""
        if refit:
            shutil.rmtree(run / "twin")
            fitted = _program(folder, "fit", str(run), "--json")
            again = json.loads(fitted.stdout) if fitted.returncode == 0 else None
        return WholeSweep(
            exit_code=done.returncode,
            said=done.stderr,
            wall_s=wall_s,
            result=json.loads(done.stdout) if done.returncode == 0 else {},
            truth=truth,
            orders_csv=orders_csv,
            refit=again,
        )


def _program(folder: str, *words: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [*PROGRAM, *words], cwd=folder, capture_output=True, text=True, check=False
    )
