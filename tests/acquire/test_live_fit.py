"""The running fit: what is news, what a jump does to the sweep, what is foreseen."""

import json
import sys
from pathlib import Path

import pytest
from acquire_fakes import FakeBench, QuietProgress, opener, small_job

from pitchsweep.acquire import live_fit
from pitchsweep.acquire.acquire_errors import FaultMet
from pitchsweep.acquire.journal_file import open_journal
from pitchsweep.acquire.live_fit import LiveFit
from pitchsweep.acquire.live_judge import LaserJumped, LiveJudge, told_before
from pitchsweep.acquire.plan_precision import plan_precision
from pitchsweep.acquire.run_table import read_run
from pitchsweep.acquire.sweep_plan import Step, plan_sweep
from pitchsweep.acquire.sweep_session import sweep_job
from pitchsweep.configs.fault_policies import FaultPolicies
from pitchsweep.configs.reader import read_job
from pitchsweep.configs.schedule_model import Schedule

ANSWERS = {
    16: {"jumps": [], "warnings": ["near step 3 the spots move as if it fell"]},
    32: {"jumps": [(20, 30.0)], "warnings": ["again the spots move as if it fell"]},
    48: {"jumps": [(23, 90.0), (40, 20.0)], "warnings": []},
    64: {"jumps": [(22, 90.0), (41, 40.0)], "warnings": []},
}


def canned() -> tuple[str, ...]:
    """A worker that answers what ``ANSWERS`` says, and ends at anything else."""
    rows = {
        look: {
            "pitch_nm": 830.0,
            "u_pitch_nm": 0.1,
            "warnings": answer["warnings"],
            "jumps": [
                {
                    "laser": "red",
                    "run": 0,
                    "step": step,
                    "size_pm": 100.0,
                    "u_pm": 10.0,
                    "gain": gain,
                }
                for step, gain in answer["jumps"]
            ],
        }
        for look, answer in ANSWERS.items()
    }
    script = (
        "import json, sys\n"
        f"rows = {json.dumps({str(k): v for k, v in rows.items()})}\n"
        "for line in sys.stdin:\n"
        "    print(json.dumps(rows[line.strip()]), flush=True)\n"
    )
    return (sys.executable, "-c", script)


def test_each_jump_and_warning_is_news_once_and_only_when_it_is_sure(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(live_fit, "WORKER", canned())
    news = {}
    with LiveFit(tmp_path, 160) as live:
        for step in range(97):
            if found := live.before_step(step):
                news[step] = found
    assert [n.steps for n in news.values()] == [16, 32, 48, 64]
    assert [[j.step for j in n.jumps] for n in news.values()] == [[], [20], [], [41]]
    assert [len(n.warnings) for n in news.values()] == [1, 0, 0, 0]


def test_a_jump_told_before_a_resume_is_no_news(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(live_fit, "WORKER", canned())
    with LiveFit(tmp_path, 160, told_jumps=[20]) as live:
        found = [live.before_step(step) for step in range(81)]
    assert [j.step for n in found if n for j in n.jumps] == [41]


def jumping(policy: str, monkeypatch: pytest.MonkeyPatch, folder: Path) -> FakeBench:
    """A small sweep whose laser is told to have jumped at step 4 when step 9 is due."""
    job = small_job(step_deg=4.0)
    faults = FaultPolicies.model_validate({"laser_jump": policy})
    recipe = job.recipe.model_copy(update={"faults": faults})
    job = job.model_copy(update={"recipe": recipe})
    plan = plan_sweep(job, "x")

    def before_step(self: LiveJudge, step: Step) -> list[LaserJumped]:
        if step.step != 9:
            return []
        return [LaserJumped(plan.steps[4], "red", "it is another by 100 pm")]

    monkeypatch.setattr(LiveJudge, "before_step", before_step)
    fake = FakeBench(job)
    sweep_job(job, folder, QuietProgress(), opener(fake))
    return fake


@pytest.mark.parametrize("policy", ["note", "pause", "skip", "retry", "stop"])
def test_a_jump_is_met_as_the_recipe_says(
    policy: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    if policy == "stop":
        with pytest.raises(FaultMet, match="another by 100 pm"):
            jumping(policy, monkeypatch, tmp_path)
    else:
        fake = jumping(policy, monkeypatch, tmp_path)
        assert ("person" in fake.log) == (policy == "pause")
    (run,) = [path for path in tmp_path.iterdir() if path.is_dir()]
    record = read_run(run)
    (fault,) = record.faults
    assert (fault.what, fault.step) == ("laser jump", 4)
    assert fault.policy.startswith(policy)
    missing = {"skip": set(range(4, 9)), "stop": set(range(9, record.planned))}
    done = {step.row.step for step in record.steps}
    assert set(range(record.planned)) - done == missing.get(policy, set())
    with open_journal(run / "run.db", read_only=True) as journal:
        assert told_before(journal) == [4]


def test_a_precision_out_of_reach_is_said_before_the_first_step(
    tmp_path: Path,
) -> None:
    job = small_job()
    job = job.model_copy(update={"schedule": Schedule(enough_relative_u=1e-7)})
    progress = QuietProgress()
    sweep_job(job, tmp_path, progress, opener(FakeBench(job)))
    (said,) = [text for text in progress.said if "the relative u will be" in text]
    assert "not 1.0e-07" in said and "would bring u from" in said


def test_more_of_a_plan_tells_the_pitch_better() -> None:
    job = read_job("demo:shims-four-mounts").job
    steps = plan_sweep(job, "x").steps
    one, four = (plan_precision(job, some) for some in (steps[:91], steps))
    assert one is not None and four is not None
    # Four mounts against one: DESIGN's table has a factor of 5 to 7 between them.
    assert four.relative_u < one.relative_u / 3.0
    assert plan_precision(job, steps[:1]) is None
