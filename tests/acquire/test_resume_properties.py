"""What remains after any history of intents, against a plain model."""

import pytest
from acquire_fakes import small_job
from hypothesis import given
from hypothesis import strategies as st

from pitchsweep.acquire.journal_rows import IntentRow
from pitchsweep.acquire.resume import standing
from pitchsweep.acquire.sweep_plan import plan_sweep

PLAN = plan_sweep(small_job(), "x")


def intent(number: int, step: int, outcome: str | None) -> IntentRow:
    planned = PLAN.steps[step]
    return IntentRow(
        intent=number,
        session=1,
        kind="step",
        step=step,
        mount=planned.mount,
        mount_deg=planned.mount_deg,
        laser=planned.laser,
        stage_deg=planned.stage_deg,
        planned_s=planned.planned_s,
        outcome=outcome,
        readback_deg=None,
        bench_s=None,
    )


@given(
    st.lists(
        st.tuples(
            st.integers(0, len(PLAN.steps) - 1),
            st.sampled_from(["done", "failed", None]),
        )
    )
)
def test_standing_agrees_with_a_plain_model(
    history: list[tuple[int, str | None]],
) -> None:
    rows = [intent(n, step, out) for n, (step, out) in enumerate(history, 1)]
    found = standing(PLAN, rows)
    done = {step for step, out in history if out == "done"}
    assert set(found.done) == done
    assert [s.step for s in found.remaining] == [
        s.step for s in PLAN.steps if s.step not in done
    ]
    assert set(found.in_doubt) == {s for s, out in history if out is None} - done
    for step, row in found.done.items():
        later = [r for r in rows if r.step == step and r.outcome == "done"]
        assert row == later[-1]


def test_zero_checks_are_counted_and_never_done() -> None:
    row = intent(1, 0, "done")
    check = IntentRow(**{**row.__dict__, "kind": "zero-check", "step": 9})
    found = standing(PLAN, [check, check])
    assert found.zero_checks == 2 and not found.done


def test_a_step_of_another_plan_is_refused() -> None:
    row = intent(1, 0, "done")
    for change in ({"stage_deg": 99.0}, {"laser": "blue"}, {"step": 10_000}):
        with pytest.raises(ValueError, match="not in this plan"):
            standing(PLAN, [IntentRow(**{**row.__dict__, **change})])
