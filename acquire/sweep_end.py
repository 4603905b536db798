"""Why a sweep ends before its last step: late, or precise enough. Acts (clock)."""

from collections.abc import Callable

from pitchsweep.acquire.fit_input import FitInput
from pitchsweep.acquire.precision_watch import PrecisionWatch
from pitchsweep.acquire.run_folder import RunFolder
from pitchsweep.acquire.run_journal import RunJournal
from pitchsweep.acquire.run_table import input_from_run, record_of
from pitchsweep.acquire.sweep_plan import Step, SweepPlan
from pitchsweep.acquire.sweep_start import Start
from pitchsweep.drivers.devices import BenchClock


class SweepEnd:
    """Asked before every step."""

    def __init__(
        self,
        folder: RunFolder,
        plan: SweepPlan,
        journal: RunJournal,
        clock: BenchClock,
        start: Start,
        say: Callable[[str], None],
    ) -> None:
        self._folder = folder
        self._plan = plan
        self._journal = journal
        self._clock = clock
        self._start = start
        schedule = folder.job.schedule
        self._stop_by = schedule.stop_by
        self._precision = None
        if schedule.enough_relative_u is not None:
            self._precision = PrecisionWatch(
                schedule.enough_relative_u,
                repeats_of(plan),
                self._kept_before,
                say,
            )

    def before_step(self, step: Step) -> str | None:
        """Why the sweep ends before ``step``; None to go on."""
        ends_s = self._start.ends_bench_s
        if ends_s is not None and self._clock.now_s() >= ends_s:
            return f"the schedule says to stop by {self._stop_by}"
        if self._precision is None:
            return None
        return self._precision.before_step(step.step) or None

    def _kept_before(self, step: int) -> FitInput:
        return input_from_run(
            record_of(self._folder, self._plan, self._journal, before=step)
        )


def repeats_of(plan: SweepPlan) -> list[int]:
    """First step of every repeat in every mount, and the number of steps."""
    firsts: dict[tuple[int, int], int] = {}
    for step in plan.steps:
        firsts.setdefault((step.mount, step.repeat), step.step)
    return [*firsts.values(), len(plan.steps)]
