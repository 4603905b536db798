"""Journal rows -> what is done, in doubt, remaining (pure).

An intent without outcome is in doubt: it is repeated whole and its frames do not
count. A step is done by the last of its intents that has the outcome ``done``.
"""

from collections.abc import Iterable
from dataclasses import dataclass

from pitchsweep.acquire.journal_rows import IntentRow
from pitchsweep.acquire.sweep_plan import Step, SweepPlan


@dataclass(frozen=True)
class Standing:
    """Where a run stands: intents of done steps, numbers in doubt, steps to do.

    ``done`` maps a step number to its valid intent; ``zero_checks`` counts every
    zero check ever begun.
    """

    done: dict[int, IntentRow]
    in_doubt: tuple[int, ...]
    remaining: tuple[Step, ...]
    zero_checks: int


def standing(plan: SweepPlan, intents: Iterable[IntentRow]) -> Standing:
    """The standing of a run with this plan.

    Raises ValueError when the journal holds a step that the plan does not, or places
    it elsewhere: the journal then belongs to another job.
    """
    planned = {step.step: step for step in plan.steps}
    done: dict[int, IntentRow] = {}
    doubtful: set[int] = set()
    zero_checks = 0
    for row in intents:
        if row.kind == "zero-check":
            zero_checks += 1
            continue
        _check_same(planned.get(row.step), row)
        if row.outcome == "done":
            done[row.step] = row
        elif row.outcome is None:
            doubtful.add(row.step)
    return Standing(
        done=dict(sorted(done.items())),
        in_doubt=tuple(sorted(doubtful - done.keys())),
        remaining=tuple(step for step in plan.steps if step.step not in done),
        zero_checks=zero_checks,
    )


def _check_same(step: Step | None, row: IntentRow) -> None:
    if step is None or (step.mount, step.laser, step.stage_deg) != (
        row.mount,
        row.laser,
        row.stage_deg,
    ):
        raise ValueError(
            f"the journal's step {row.step} is not in this plan: job.yaml or run.db "
            "was changed"
        )
