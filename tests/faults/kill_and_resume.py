"""Kills the controller's process group, resumes, compares. Run it as a script.

    python tests/faults/kill_and_resume.py [RANDOM_MOMENTS [fresh]]

A short sweep with frames on the twin is killed with SIGKILL after every step kept and
at random moments (seed 0), in turn with and without its guard and its twin; of every
two, one is killed once more while it resumes. Each time: every acknowledged step is
kept and its frame files are what the journal says, the light is off on the unit's log
within 250 ms of the kill (where the twin lives to tell), and frames' checksums,
orders.csv and result.json equal those of a sweep left alone. With ``fresh`` repeated
steps see other noise, and the pitch agrees within half its standard uncertainty.
"""

import itertools
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

from pitchsweep.acquire.frame_store import FrameStore
from pitchsweep.acquire.journal_file import open_journal
from pitchsweep.configs.frozen_job import freeze
from pitchsweep.configs.reader import read_job

COMMAND = (sys.executable, "-m", "pitchsweep.acquire", "sweep")
DARK_WITHIN_S = 0.25
HELPERS = {"guard": "guard_process", "twin": "drivers.twin"}
"""Processes of sessions of their own, by a word of their command line."""
VICTIMS = ((), ("guard",), ("twin",), ("guard", "twin"))
"""What is killed with the controller."""
AGREE_U = 0.5
RESUMES = 5
STARVED = ("heartbeat-stale", "unit-silent", "tick-late")
BEGUN = "run folder"
RESUMING = "going on with"
STEP_KEPT = "{} of 10 steps"
FIRST, COMPLETE = STEP_KEPT.format(1), "sweep complete"
"""Said when there is a run folder, when a resume has read its journal, and later."""


@dataclass(frozen=True)
class Outcome:
    """What must be the same: checksum by frame file, table, result."""

    frames: dict[str, str]
    orders: bytes
    result: bytes


def write_job(path: Path, record: str = "frames", repeated_noise: str = "same") -> None:
    """The shipped shim job with ten steps and a camera of a third of a megapixel."""
    job = read_job("demo:shims").job
    assert job.bench.twin is not None
    recipe = job.recipe.model_copy(
        update={
            "start_deg": -27.0,
            "stop_deg": 27.0,
            "step_deg": 6.0,
            "record": record,
            "dark_every_steps": 4,
        }
    )
    camera = job.bench.camera
    smaller = {
        "width_px": camera.width_px // 2,
        "height_px": camera.height_px // 2,
        "mm_per_px": 2.0 * camera.mm_per_px,
        "centre_column_px": (camera.centre_column_px - 0.5) / 2.0,
        "centre_row_px": (camera.centre_row_px - 0.5) / 2.0,
    }
    twin = job.bench.twin.model_copy(update={"repeated_noise": repeated_noise})
    camera = camera.model_copy(update=smaller)
    bench = job.bench.model_copy(update={"camera": camera, "twin": twin})
    job = job.model_copy(update={"recipe": recipe, "bench": bench})
    path.write_text(freeze(job), encoding="utf-8")


def start(job: Path, runs: Path) -> "subprocess.Popen[str]":
    """A sweep in a process group of its own."""
    return _started([str(job), "--runs", str(runs)])


def _started(words: list[str]) -> "subprocess.Popen[str]":
    return subprocess.Popen(
        [*COMMAND, *words],
        stdout=subprocess.DEVNULL,
        stderr=subprocess.PIPE,
        text=True,
        start_new_session=True,
    )


def helpers_of(pid: int) -> dict[str, int]:
    """Guard and twin of the controller ``pid``: name -> process (Linux)."""
    children = Path(f"/proc/{pid}/task/{pid}/children").read_text().split()
    found = {}
    for child, (name, word) in itertools.product(children, HELPERS.items()):
        command = Path(f"/proc/{child}/cmdline")
        if command.exists() and word.encode() in command.read_bytes():
            found[name] = int(child)
    return found


def kill(process: "subprocess.Popen[str]", also: tuple[str, ...] = ()) -> float:
    """SIGKILL to the whole group, and to helpers; the monotonic time of it."""
    helpers = helpers_of(process.pid) if also else {}
    at_s = time.monotonic()
    os.killpg(process.pid, signal.SIGKILL)
    for name in also:
        if name in helpers:
            os.kill(helpers[name], signal.SIGKILL)
    process.wait()
    assert process.stderr is not None
    process.stderr.close()
    return at_s


def kill_after_step(
    job: Path, runs: Path, step: int, also: tuple[str, ...] = ()
) -> float:
    """Kills as soon as the progress says that ``step`` steps are kept."""
    process = start(job, runs)
    wait_for_words(process, STEP_KEPT.format(step))
    return kill(process, also)


def kill_after_seconds(
    process: "subprocess.Popen[str]",
    seconds: float,
    also: tuple[str, ...] = (),
    words: str = BEGUN,
) -> float:
    """Kills so many seconds after ``words`` were said."""
    wait_for_words(process, words)
    time.sleep(seconds)
    return kill(process, also)


def wait_for_words(process: "subprocess.Popen[str]", words: str) -> None:
    """Returns when ``words`` were said."""
    assert process.stderr is not None
    said = []
    for line in process.stderr:
        said.append(line)
        if words in line:
            return
    raise AssertionError(f"'{words}' was not said, but: {''.join(said)}")


def time_of_words(process: "subprocess.Popen[str]", words: str) -> float:
    """The monotonic time at which ``words`` were said."""
    wait_for_words(process, words)
    return time.monotonic()


def only_run(runs: Path) -> Path | None:
    """The one run folder, if the sweep came that far."""
    found = sorted(runs.glob("*")) if runs.exists() else []
    return found[0] if found and (found[0] / "job.yaml").exists() else None


def acknowledged(run: Path) -> dict[int, tuple[str, ...]]:
    """Step -> its frames' checksums, of every acknowledged step.

    Raises StorageFailed where a file is not what the journal says.
    """
    if not (run / "run.db").exists():
        return {}
    store, found = FrameStore(run), {}
    with open_journal(run / "run.db") as journal:
        for row in journal.intents():
            if row.outcome == "done" and row.kind == "step":
                frames = journal.frames(row.intent)
                for frame in frames:
                    store.read(frame.file, frame.sha256)
                found[row.step] = tuple(frame.sha256 for frame in frames)
    return found


def resume(run: Path) -> None:
    """Resumes to the end; raises CalledProcessError if it cannot.

    A trip because this machine was too busy to keep the heartbeat is resumed again.
    """
    for left in reversed(range(RESUMES)):
        done = subprocess.run(
            [*COMMAND, "--resume", str(run)], capture_output=True, text=True
        )
        if not (left and any(word in done.stderr for word in STARVED)):
            done.check_returncode()
            return


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


def check(
    run: Path,
    killed_s: float,
    whole: Outcome,
    *,
    also: tuple[str, ...] = (),
    again_s: float | None = None,
    fresh: bool = False,
) -> float:
    """Resumes a killed run and checks everything; seconds from kill to dark.

    ``also`` says what was killed with it; ``again_s`` after how many seconds the first
    resume is killed too.
    """
    time.sleep(DARK_WITHIN_S + 0.1)
    dark_s = 0.0 if "twin" in also else dark_after_s(run, killed_s)
    assert dark_s <= DARK_WITHIN_S, f"dark only after {dark_s:.3f} s"
    before = acknowledged(run)
    if again_s is not None:
        resuming = _started(["--resume", str(run)])
        kill_after_seconds(resuming, again_s, also, RESUMING)
        between = acknowledged(run)
        assert before.items() <= between.items(), "a step was lost in the resume"
        before = between
    resume(run)
    after = acknowledged(run)
    assert before.items() <= after.items(), "an acknowledged step was lost"
    again = outcome(run)
    if fresh:
        off = pitch_off_u(again, whole)
        assert off <= AGREE_U, f"the pitch is {off:.2f} u away"
        return dark_s
    for name in ("frames", "orders", "result"):
        assert getattr(again, name) == getattr(whole, name), f"other {name}"
    return dark_s


def pitch_off_u(one: Outcome, other: Outcome) -> float:
    """How far the pitches lie apart, in standard uncertainties of the second."""
    first, second = json.loads(one.result), json.loads(other.result)
    off_nm = abs(first["pitch_nm"] - second["pitch_nm"])
    return float(off_nm / second["u_pitch_nm"])


def main() -> int:
    """Runs the campaign and prints one line a kill."""
    moments = int(sys.argv[1]) if len(sys.argv) > 1 else 20
    fresh = "fresh" in sys.argv
    random = Random(0)
    with tempfile.TemporaryDirectory() as folder:
        job = Path(folder) / "job.yaml"
        write_job(job, repeated_noise="fresh" if fresh else "same")
        process = start(job, Path(folder) / "whole")
        times = [time_of_words(process, w) for w in (BEGUN, FIRST, COMPLETE)]
        process.communicate()
        whole_run = only_run(Path(folder) / "whole")
        assert process.returncode == 0 and whole_run is not None
        lasts_s, steps_s = time.monotonic() - times[0], times[2] - times[1]
        whole = outcome(whole_run)
        print(f"left alone: {len(whole.frames)} frames, {lasts_s:.1f} s")
        worst_s, worst_u, failed = 0.0, 0.0, 0
        for number in range(10 + moments):
            runs = Path(folder) / f"killed-{number}"
            also = VICTIMS[number % len(VICTIMS)]
            again_s = random.uniform(0.0, lasts_s) if number // 4 % 2 else None
            if number < 10:
                what = f"after step {number + 1}"
                killed_s = kill_after_step(job, runs, number + 1, also)
            else:
                # Every second one while steps are taken, the others at any time.
                words, span_s = ((BEGUN, lasts_s), (FIRST, steps_s))[number // 2 % 2]
                after_s = random.uniform(0.0, span_s)
                what = f"{after_s:.3f} s after '{words}'"
                killed_s = kill_after_seconds(start(job, runs), after_s, also, words)
            what = ", ".join([what, *(f"{name} too" for name in also)])
            if again_s is not None:
                what += f", again {again_s:.3f} s into the resume"
            run = only_run(runs)
            if run is None:
                print(f"{what}: nothing had begun", flush=True)
                continue
            kept = len(acknowledged(run))
            try:
                dark_s = check(
                    run, killed_s, whole, also=also, again_s=again_s, fresh=fresh
                )
            except (AssertionError, subprocess.CalledProcessError) as error:
                failed += 1
                said = getattr(error, "stderr", None) or error
                print(f"{what}: {kept} steps kept, FAILED: {said}", flush=True)
                continue
            worst_s = max(worst_s, dark_s)
            worst_u = max(worst_u, pitch_off_u(outcome(run), whole))
            print(f"{what}: {kept} steps kept, as it should be", flush=True)
        print(f"{failed} failed; longest light after a kill: {1000 * worst_s:.0f} ms; ")
        print(f"largest difference of the pitch: {worst_u:.3g} u")
    return 1 if failed else 0


if __name__ == "__main__":
    sys.exit(main())
