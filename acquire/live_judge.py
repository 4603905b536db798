"""What the running fit means for the sweep: jumps, warnings, precision. Acts (report).

The rules of what is a jump are the fit's; here is decided what is told, and when.
"""

from collections.abc import Sequence
from dataclasses import dataclass

from pitchsweep.acquire.live_fit import LiveFit, LiveNews
from pitchsweep.acquire.plan_precision import plan_precision
from pitchsweep.acquire.run_journal import RunJournal
from pitchsweep.acquire.sweep_plan import Step, SweepPlan
from pitchsweep.acquire.sweep_reporter import SweepReporter
from pitchsweep.acquire.sweep_start import Start
from pitchsweep.analysis.records import JumpSeen
from pitchsweep.configs.job_model import Job
from pitchsweep.drivers.devices import BenchClock

ROOM = 1.1
"""A precision is called out of reach when it misses by more than this factor."""


@dataclass(frozen=True)
class LaserJumped:
    """The wavelength is another from ``first`` on; ``detail`` says by how much."""

    first: Step
    laser: str
    detail: str


class LiveJudge:
    """Asked before every step for jumps that are news; tells everything else itself."""

    def __init__(
        self,
        job: Job,
        plan: SweepPlan,
        report: SweepReporter,
        clock: BenchClock,
        start: Start,
        live: LiveFit,
    ) -> None:
        self._job = job
        self._plan = plan
        self._report = report
        self._clock = clock
        self._ends_s = start.ends_bench_s
        self._foretold = False
        self._live = live

    def at_start(self, remaining: Sequence[Step]) -> None:
        """Warns if the plan will not reach the precision wanted by the hour."""
        enough = self._job.schedule.enough_relative_u
        if enough is None or not remaining or remaining[0].step > 0:
            return
        steps = self._in_time(remaining[0])
        foreseen = plan_precision(self._job, steps, advise=True)
        if foreseen is None:
            return
        read = f"with spots read to {self._job.bench.reading_u_mm:g} mm"
        if foreseen.relative_u > ROOM * enough:
            self._warn(None, foreseen.relative_u, steps, read, foreseen.advice)
        self._report.status.update(
            steps_in_time=len(steps), relative_u_foreseen=foreseen.relative_u
        )

    def before_step(self, step: Step) -> list[LaserJumped]:
        """Jumps that are news; whatever else the fit shows is told."""
        news = self._live.before_step(step.step)
        if news is None:
            return []
        for warning in news.warnings:
            self._report.warning(step, warning)
        self._judge_precision(step, news)
        return [self._jumped(jump) for jump in news.jumps]

    def _jumped(self, jump: JumpSeen) -> LaserJumped:
        first = self._plan.steps[min(jump.step, len(self._plan.steps) - 1)]
        return LaserJumped(
            first,
            jump.laser,
            f"the wavelength of {jump.laser} is another by {jump.size_pm:+.0f} pm "
            f"(u {jump.u_pm:.0f} pm) since about step {jump.step}",
        )

    def _judge_precision(self, step: Step, news: LiveNews) -> None:
        relative = news.u_pitch_nm / news.pitch_nm
        self._report.status.update(
            pitch_nm_so_far=news.pitch_nm,
            relative_u_so_far=relative,
            **({"so_far_of": news.part} if self._job.lot else {}),
        )
        enough = self._job.schedule.enough_relative_u
        if enough is None:
            return
        steps = self._in_time(step)
        so_far = plan_precision(self._job, self._plan.steps[: news.steps])
        at_end = plan_precision(self._job, steps)
        if so_far is None or at_end is None:
            return
        # What the plan makes of the rest, with the spots as well read as they are.
        expected = relative * min(1.0, at_end.relative_u / so_far.relative_u)
        self._report.status.update(relative_u_expected=expected)
        if expected > ROOM * enough and not self._foretold:
            advice = plan_precision(self._job, steps, advise=True)
            words = () if advice is None else advice.advice
            self._warn(step, expected, steps, "as the spots are read now", words)
            self._foretold = True

    def _in_time(self, step: Step) -> Sequence[Step]:
        """The steps that will have been taken when the schedule ends, from ``step``."""
        if self._ends_s is None:
            return self._plan.steps
        left_s = self._ends_s - self._clock.now_s()
        return [s for s in self._plan.steps if s.planned_s - step.planned_s <= left_s]

    def _warn(
        self,
        step: Step | None,
        expected: float,
        steps: Sequence[Step],
        how: str,
        advice: Sequence[str],
    ) -> None:
        total = len(self._plan.steps)
        until = "at the end"
        if len(steps) < total:
            until = f"by {self._job.schedule.stop_by}, after {len(steps)} of {total}"
            until += " steps,"
        text = (
            f"{until} the relative u will be near {expected:.1e} {how}, not "
            f"{self._job.schedule.enough_relative_u:.1e}"
        )
        self._report.warning(step, "; ".join([text, *advice[:2]]))


def told_before(journal: RunJournal) -> list[int]:
    """Steps of the jumps that earlier sessions of this run told of."""
    return [
        fault.step
        for fault in journal.faults()
        if fault.what == "laser jump" and fault.step is not None
    ]
