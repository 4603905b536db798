"""Every declared fault at its n-th occurrence, over the real processes. A script.

    python tests/faults/fault_campaign.py [MOST_N] [NAME...]

Each fault of the simulated bench happens at the n-th occasion, n = 1..MOST_N (5), of a
short sweep, under every policy that makes sense for it. Checked each time: the policy
stands in journal, terminal and report; it is dark on the unit's log whenever a person
is waited for or the stage searches its zero; the run ends as the policy says; and the
pitch, where there is one, lies within 4 of its standard uncertainties of the truth.
"""

import json
import subprocess
import sys
import tempfile
from collections.abc import Iterator
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path

from pitchsweep.acquire.journal_file import open_journal
from pitchsweep.acquire.journal_rows import FaultRow
from pitchsweep.acquire.sweep_plan import plan_sweep
from pitchsweep.acquire.zero_order_watch import is_well_seen, predict_zero_order
from pitchsweep.configs.fault_policies import FaultPolicies
from pitchsweep.configs.frozen_job import freeze
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.reader import read_job
from pitchsweep.configs.sensor_model import AirSensor, PowerSensor
from pitchsweep.configs.twin_faults import TwinFault

PROGRAM = (sys.executable, "-m", "pitchsweep.acquire")
SIGMAS = 4.0
MIDST = 30
HOP_PM = 300.0


@dataclass(frozen=True)
class Case:
    """A fault, the key of its policy, and the policies to try."""

    at: str
    does: str
    kind: str
    policies: tuple[str, ...]
    record: str = "spots"
    every: int = 1
    late_s: float = 0.5
    steps: int = 12

    @property
    def name(self) -> str:
        return f"{self.at} {self.does}"


CASES = (
    Case("stage-ask", "silent", "stage_no_answer", ("retry", "pause"), every=9),
    Case("stage-ask", "late", "stage_no_answer", ("retry",), every=9, late_s=2.4),
    Case("stage-ask", "garbage", "stage_nonsense", ("retry", "stop"), every=9),
    Case("stage-ask", "declined", "stage_refused", ("retry", "skip"), every=9),
    Case("stage-move", "stall", "stage_stalled", ("re-home", "pause"), every=3),
    Case(
        "stage-move", "wrong-place", "stage_wrong_place", ("re-home", "skip"), every=3
    ),
    Case("stage-move", "zero-lost", "stage_zero_lost", ("re-home", "stop"), every=3),
    Case("exposure", "no-frame", "camera_no_frame", ("retry", "skip"), "frames"),
    Case("exposure", "refused", "camera_no_frame", ("retry", "pause"), "frames"),
    Case("exposure", "stale", "camera_stale", ("retry",), "frames"),
    Case("exposure", "identical", "camera_identical", ("retry",), "frames"),
    Case("exposure", "wrong-size", "camera_wrong_frame", ("retry",), "frames"),
    Case("exposure", "wrong-depth", "camera_wrong_frame", ("retry",), "frames"),
    Case("exposure", "black", "camera_black", ("retry", "skip"), "frames"),
    Case("exposure", "white", "camera_white", ("retry", "stop"), "frames"),
    Case("exposure", "gone", "camera_gone", ("retry", "pause"), "frames"),
    Case("light", "dropout", "laser_dropout", ("retry", "pause")),
    Case("light", "power-drop", "laser_power", ("note", "stop")),
    Case("light", "blocked", "spots_vanished", ("retry", "skip")),
    Case(
        "light",
        "mode-hop",
        "laser_jump",
        ("note", "pause", "stop", "skip"),
        every=3,
        steps=92,
    ),
    Case("light", "stray-spot", "spots_appeared", ("note", "skip")),
    Case("sensors", "missing", "air_missing", ("note", "stop")),
)


def occasion(case: Case, nth: int) -> int:
    """Which occasion the ``nth`` occurrence is; identical frames need one before."""
    if case.does in ("blocked", "stray-spot"):
        looks = well_seen_looks()
        # Only far above or below the band of the orders is a stray spot told apart.
        return looks[0] if case.does == "stray-spot" else looks[(nth - 1) % len(looks)]
    if case.does == "mode-hop":
        # Before and after it there must be enough to tell it by.
        return MIDST + (nth - 1) * case.every
    first = 2 if case.does in ("identical", "stale") else 1
    return first + (nth - 1) * case.every


def well_seen_looks() -> list[int]:
    """Looks at the screen (the zero check is the first) that must show a zero order.

    A blocked beam at the zero check is a trip, which no policy decides.
    """
    job = swept_job()
    steps = plan_sweep(job, "").steps
    return [
        2 + step.step
        for step in steps
        if is_well_seen(
            job.bench, predict_zero_order(job.bench, job.part, step.incidence_deg)
        )
    ]


def swept_job(steps: int = 12) -> Job:
    """The shipped shim in twelve steps, or in many to tell a small thing by."""
    job = read_job("demo:shims").job
    few = steps == 12
    recipe = job.recipe.model_copy(
        update={
            "start_deg": -27.5 if few else -45.5,
            "stop_deg": 27.5 if few else 45.5,
            "step_deg": 5.0 if few else 91.0 / (steps - 1),
            "dark_every_steps": 100,
        }
    )
    return job.model_copy(update={"recipe": recipe})


def job_for(case: Case, policy: str, nth: int) -> Job:
    """The shipped shim in a few steps, with sensors, one fault and its policy."""
    job = swept_job(case.steps)
    assert job.bench.twin is not None
    fault = TwinFault.model_validate(
        {
            "at": case.at,
            "nth": occasion(case, nth),
            "does": case.does,
            "late_s": case.late_s,
        }
    )
    twin = job.bench.twin.model_copy(update={"faults": (fault,), "seed": nth})
    if case.does == "mode-hop":
        effects = twin.effects.model_copy(update={"mode_hop_pm": HOP_PM})
        twin = twin.model_copy(update={"effects": effects, "spot_reading_mm": 0.03})
    camera = job.bench.camera.model_copy(
        update={
            "width_px": 640,
            "height_px": 200,
            "mm_per_px": 0.625,
            "centre_column_px": 319.5,
            "centre_row_px": 99.5,
        }
    )
    bench = job.bench.model_copy(
        update={
            "twin": twin,
            "camera": camera,
            "air_sensor": AirSensor(name="air"),
            "power_sensor": PowerSensor(name="power"),
        }
    )
    policies = FaultPolicies.model_validate({case.kind: policy, "retries": 2})
    recipe = job.recipe.model_copy(update={"record": case.record, "faults": policies})
    return job.model_copy(update={"bench": bench, "recipe": recipe})


@dataclass(frozen=True)
class Played:
    """What one run left."""

    code: int
    said: str
    faults: list[FaultRow]
    steps: int
    report: str
    off_in_u: float | None
    lit: list[tuple[float, float]]
    waits: list[tuple[float, float]]


def play(job: Job, folder: Path) -> Played:
    """Sweeps ``job`` to its end with the program itself."""
    (folder / "job.yaml").write_text(freeze(job), encoding="utf-8")
    done = subprocess.run(
        [*PROGRAM, "sweep", "job.yaml", "--json"],
        cwd=folder,
        capture_output=True,
        text=True,
        check=False,
    )
    (run,) = (folder / "runs").iterdir()
    with open_journal(run / "run.db", read_only=True) as journal:
        faults = journal.faults()
        steps = {
            row.step
            for row in journal.intents()
            if row.outcome == "done" and row.kind == "step"
        }
    report = run / "report.html"
    truth = json.loads((run / "twin" / "twin_truth.json").read_text())
    result = json.loads(done.stdout) if done.returncode == 0 else None
    off = result and (result["pitch_nm"] - truth["pitch_nm"]) / result["u_pitch_nm"]
    return Played(
        code=done.returncode,
        said=done.stderr,
        faults=faults,
        steps=len(steps),
        report=report.read_text() if report.exists() else "",
        off_in_u=off,
        lit=_stretches(run, "light", "on"),
        waits=_stretches(run, "person", "asked"),
    )


def _unit_rows(run: Path) -> list[tuple[str, str, float]]:
    """What happened at the unit, by its own log: what, value and UTC seconds."""
    rows = map(json.loads, (run / "twin" / "unit.log").read_text().splitlines())
    return [
        (row["what"], row["value"], datetime.fromisoformat(row["utc"]).timestamp())
        for row in rows
    ]


def _stretches(run: Path, what: str, begins: str) -> list[tuple[float, float]]:
    """Every stretch of ``what`` from ``begins`` to its next change, UTC seconds."""
    stretches: list[tuple[float, float]] = []
    since = None
    for name, value, at_s in _unit_rows(run):
        if name == what and value == begins:
            since = at_s
        elif name == what and since is not None:
            stretches.append((since, at_s))
            since = None
    return stretches


def check(case: Case, policy: str, played: Played) -> None:
    """Holds one run against what its policy says; AssertionError otherwise."""
    steps = case.steps
    words = case.kind.replace("_", " ")
    met = [row for row in played.faults if row.what == words]
    assert met, f"no '{words}' in the journal: {played.said}"
    assert met[0].policy.startswith(policy), met[0]
    assert words in played.said and met[0].policy in played.said
    assert "Traceback" not in played.said
    for begun_s, ended_s in played.waits:
        assert not any(b < ended_s and e > begun_s for b, e in played.lit), "lit wait"
    if policy == "pause":
        assert played.waits, "nobody was waited for"
    if policy == "stop":
        assert played.code in (4, 5) and "--resume" in played.said, played.said
        return
    assert played.code == 0, played.said
    missing = 1 if policy == "skip" and met[0].step is not None else 0
    if policy == "skip" and case.does == "mode-hop":
        missing = steps  # everything since then is left out
    assert steps - missing <= played.steps <= steps, played.steps
    assert words in played.report, "not in the report"
    assert played.off_in_u is not None and abs(played.off_in_u) <= SIGMAS


def campaign(most_n: int, names: list[str]) -> Iterator[str]:
    """Plays everything and yields one line a run."""
    for case in CASES:
        if names and case.does not in names:
            continue
        for policy in case.policies:
            for nth in range(1, most_n + 1):
                with tempfile.TemporaryDirectory() as folder:
                    played = play(job_for(case, policy, nth), Path(folder))
                try:
                    check(case, policy, played)
                    off = played.off_in_u
                    end = "no result" if off is None else f"{off:+.1f} u"
                    yield f"{case.name} n={nth} {policy}: as declared, {end}"
                except AssertionError as error:
                    yield f"{case.name} n={nth} {policy}: FAILED {error}"


def main() -> int:
    """Runs the campaign; 1 if anything was not as declared."""
    most_n = int(sys.argv[1]) if len(sys.argv) > 1 else 5
    failed = runs = 0
    for line in campaign(most_n, sys.argv[2:]):
        print(line, flush=True)
        runs += 1
        failed += "FAILED" in line
    print(f"{runs} runs, {failed} not as declared")
    return 1 if failed else 0


if __name__ == "__main__":
    sys.exit(main())
