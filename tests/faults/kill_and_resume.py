"""Kills the controller's process group, resumes, compares. Run it as a script.

    python tests/faults/kill_and_resume.py [RANDOM_MOMENTS]

A short sweep with frames on the twin is killed with SIGKILL after every step kept and
at random moments (seed 0), and resumed. Each time: every acknowledged step is kept,
the light is off on the unit's log within 250 ms of the kill, and frames' checksums,
orders.csv and result.json equal those of a sweep left alone.
"""

import json
import os
import signal
import subprocess
import sys
import tempfile
import time
from dataclasses import dataclass
from pathlib import Path
from random import Random

from pitchsweep.acquire.journal_file import open_journal
from pitchsweep.configs.frozen_job import freeze
from pitchsweep.configs.reader import read_job

COMMAND = (sys.executable, "-m", "pitchsweep.acquire", "sweep")
DARK_WITHIN_S = 0.25


@dataclass(frozen=True)
class Outcome:
    """What must be the same: checksum by frame file, table, result."""

    frames: dict[str, str]
    orders: bytes
    result: bytes


def write_job(path: Path, record: str = "frames") -> None:
    """The shipped shim job with ten steps."""
    job = read_job("demo:shims").job
    recipe = job.recipe.model_copy(
        update={
            "start_deg": -27.0,
            "stop_deg": 27.0,
            "step_deg": 6.0,
            "record": record,
            "dark_every_steps": 4,
        }
    )
    path.write_text(freeze(job.model_copy(update={"recipe": recipe})), encoding="utf-8")


def start(job: Path, runs: Path) -> "subprocess.Popen[str]":
    """A sweep in a process group of its own."""
    return subprocess.Popen(
        [*COMMAND, str(job), "--runs", str(runs)],
        stdout=subprocess.DEVNULL,
        stderr=subprocess.PIPE,
        text=True,
        start_new_session=True,
    )


def kill(process: "subprocess.Popen[str]") -> float:
    """SIGKILL to the whole group; the monotonic time of it."""
    at_s = time.monotonic()
    os.killpg(process.pid, signal.SIGKILL)
    process.wait()
    assert process.stderr is not None
    process.stderr.close()
    return at_s


def kill_after_step(job: Path, runs: Path, step: int) -> float:
    """Kills as soon as the progress says that ``step`` steps are kept."""
    process = start(job, runs)
    assert process.stderr is not None
    for line in process.stderr:
        if line.startswith(f"step {step}/"):
            break
    return kill(process)


def kill_after_seconds(job: Path, runs: Path, seconds: float) -> float:
    """Kills after so many seconds."""
    process = start(job, runs)
    time.sleep(seconds)
    return kill(process)


def only_run(runs: Path) -> Path | None:
    """The one run folder, if the sweep came that far."""
    found = sorted(runs.glob("*")) if runs.exists() else []
    return found[0] if found and (found[0] / "job.yaml").exists() else None


def acknowledged(run: Path) -> dict[int, tuple[str, ...]]:
    """Step -> its frames' checksums, of every acknowledged step."""
    if not (run / "run.db").exists():
        return {}
    with open_journal(run / "run.db") as journal:
        return {
            row.step: tuple(frame.sha256 for frame in journal.frames(row.intent))
            for row in journal.intents()
            if row.outcome == "done" and row.kind == "step"
        }


def resume(run: Path) -> None:
    """Resumes to the end; raises CalledProcessError if it cannot."""
    subprocess.run(
        [*COMMAND, "--resume", str(run)], check=True, capture_output=True, text=True
    )


def outcome(run: Path) -> Outcome:
    """What a complete run left."""
    frames = {}
    with open_journal(run / "run.db", read_only=True) as journal:
        for row in journal.intents():
            if row.outcome == "done" and row.kind == "step":
                frames |= {f.file: f.sha256 for f in journal.frames(row.intent)}
    return Outcome(
        frames, (run / "orders.csv").read_bytes(), (run / "result.json").read_bytes()
    )


def dark_after_s(run: Path, killed_s: float) -> float:
    """How long after the kill the light went off (0: it was dark by then)."""
    log = run / "twin" / "unit.log"
    lit, last_off_s = False, killed_s
    for line in log.read_text().splitlines() if log.exists() else ():
        entry = json.loads(line)
        if entry["what"] == "light":
            lit = entry["value"] == "on"
            if not lit:
                last_off_s = max(last_off_s, entry["monotonic_s"])
    return float("inf") if lit else last_off_s - killed_s


def check(run: Path, killed_s: float, whole: Outcome) -> float:
    """Resumes a killed run and checks everything; seconds from kill to dark."""
    time.sleep(DARK_WITHIN_S + 0.1)
    dark_s = dark_after_s(run, killed_s)
    before = acknowledged(run)
    resume(run)
    after = acknowledged(run)
    assert dark_s <= DARK_WITHIN_S, f"dark only after {dark_s:.3f} s"
    assert before.items() <= after.items(), "an acknowledged step was lost"
    again = outcome(run)
    for name in ("frames", "orders", "result"):
        assert getattr(again, name) == getattr(whole, name), f"other {name}"
    return dark_s


def main() -> int:
    """Runs the campaign and prints one line a kill."""
    moments = int(sys.argv[1]) if len(sys.argv) > 1 else 20
    random = Random(0)
    with tempfile.TemporaryDirectory() as folder:
        job = Path(folder) / "job.yaml"
        write_job(job)
        began_s = time.monotonic()
        process = start(job, Path(folder) / "whole")
        process.communicate()
        whole_run = only_run(Path(folder) / "whole")
        assert process.returncode == 0 and whole_run is not None
        lasts_s = time.monotonic() - began_s
        whole = outcome(whole_run)
        print(f"left alone: {len(whole.frames)} frames, {lasts_s:.1f} s")
        worst_s = 0.0
        for number in range(10 + moments):
            runs = Path(folder) / f"killed-{number}"
            if number < 10:
                what = f"after step {number + 1}"
                killed_s = kill_after_step(job, runs, number + 1)
            else:
                after_s = random.uniform(0.0, lasts_s)
                what = f"after {after_s:.3f} s"
                killed_s = kill_after_seconds(job, runs, after_s)
            run = only_run(runs)
            if run is None:
                print(f"{what}: nothing had begun")
                continue
            kept = len(acknowledged(run))
            worst_s = max(worst_s, check(run, killed_s, whole))
            print(f"{what}: {kept} steps kept, the same outcome", flush=True)
        print(f"longest light after a kill: {1000 * worst_s:.0f} ms")
    return 0


if __name__ == "__main__":
    sys.exit(main())
