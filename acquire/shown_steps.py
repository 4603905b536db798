"""Shows every step kept, on the terminal and in ``status.json``. Acts (both)."""

import numpy as np

from pitchsweep.acquire.journal_rows import StepSpots
from pitchsweep.acquire.progress import Progress, StepShown
from pitchsweep.acquire.status_file import StatusFile
from pitchsweep.acquire.sweep_plan import Step, SweepPlan
from pitchsweep.analysis.order_visibility import visible_orders
from pitchsweep.configs.job_model import Job


class ShownSteps:
    """Counts the steps kept and shows them."""

    def __init__(
        self,
        job: Job,
        plan: SweepPlan,
        done: int,
        progress: Progress,
        status: StatusFile,
    ) -> None:
        self._job = job
        self._plan = plan
        self._done = done
        self._progress = progress
        self._status = status

    def step_kept(self, step: Step, found: StepSpots) -> None:
        """Shows a step; zero checks are not counted."""
        if step.kind != "step":
            return
        self._done += 1
        shown = self._shown(step, found)
        self._progress.show(shown)
        self._status.update(
            state="sweeping",
            steps_done=shown.done,
            steps=shown.total,
            step=step.step,
            incidence_deg=step.incidence_deg,
            mount=step.mount + 1,
            **({"part": part_named(self._job, step)} if self._job.lot else {}),
            repeat=step.repeat + 1,
            laser=step.laser,
            spots=shown.spots,
            bench_s_left=round(shown.left_s, 1),
        )

    def _shown(self, step: Step, found: StepSpots) -> StepShown:
        job, plan = self._job, self._plan
        later = plan.steps[step.step + 1 :]
        part = job.part_in(step.mount)
        view = visible_orders(job.bench, part, step.laser, step.incidence_deg)
        return StepShown(
            done=min(self._done, len(plan.steps)),
            total=len(plan.steps),
            incidence_deg=step.incidence_deg,
            mount=step.mount,
            part=part_named(job, step),
            laser=step.laser,
            spots=len(found.spots),
            orders_expected=int(np.count_nonzero(view.seen)),
            gate="ready",
            left_s=plan.duration_s - later[0].planned_s if later else 0.0,
        )


def part_named(job: Job, step: Step) -> str:
    """A lot's part with serial and place; empty where there is one part only."""
    if not job.lot:
        return ""
    part = job.part_in(step.mount)
    return f"{part.part}, serial {part.serial}, {part.place}"
