"""A beam that stands still while the part turns is taken for no order."""

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from builders import TwinSweep, demo_job, twin_sweep
from order_tables import order_table_of

from pitchsweep.analysis.analysis_errors import NoResult
from pitchsweep.analysis.measure import measure_pitch
from pitchsweep.analysis.records import UNKNOWN_ORDER, OrderTable, Rejection
from pitchsweep.analysis.standing_beams import standing_spots
from pitchsweep.configs.job_model import Job

STILL_MM = (98.0, -2.0)


def with_standing_beam(table: OrderTable) -> OrderTable:
    """``table`` with one more spot a step, at one place to 0.1 mm, bright."""
    steps, first = np.unique(table.step, return_index=True)
    more = table.take(first)
    rng = np.random.default_rng(0)
    more = replace(
        more,
        x_mm=STILL_MM[0] + 0.1 * rng.standard_normal(len(steps)),
        y_mm=STILL_MM[1] + 0.1 * rng.standard_normal(len(steps)),
        order=np.full(len(steps), UNKNOWN_ORDER, dtype=np.int64),
        brightness=np.full(len(steps), 1.0),
    )
    columns: dict[str, Any] = {
        name: np.concatenate([value, getattr(more, name)])
        if isinstance(value, np.ndarray)
        else value
        for name, value in table.__dict__.items()
    }
    return OrderTable(**columns)


def coarse_sweep(seed: int) -> tuple[Job, TwinSweep]:
    """Nine angles, twelve degrees apart."""
    job = demo_job(
        "track-1600-red",
        recipe={"start_deg": -48.0, "stop_deg": 48.0, "step_deg": 12.0},
    )
    return job, twin_sweep(job, seed)


@pytest.mark.parametrize("seed", range(3))
def test_a_bright_standing_beam_does_not_mislead_a_coarse_sweep(seed: int) -> None:
    job, sweep = coarse_sweep(seed)
    result = measure_pitch(
        with_standing_beam(sweep.table), bench=job.bench, part=job.part
    )
    off_nm = result.pitch_nm - sweep.truth.pitch_nm
    assert abs(off_nm) < 3.0 * result.u_pitch_nm < 0.01 * result.pitch_nm
    assert np.hypot(result.table.x_mm - 98.0, result.table.y_mm + 2.0).min() > 1.0
    refused = [r for r in result.rejected if r.reason is Rejection.NO_ORDER]
    assert len(refused) >= 9
    assert "an unknown beam stands still at x 98, y -2 mm in 9 of 9" in str(
        result.warnings[0]
    )


@pytest.mark.parametrize(
    "name", ["track-1600-red", "track-740-violet", "track-320-violet", "shims-spots"]
)
def test_no_order_of_a_dense_sweep_is_taken_for_one(name: str) -> None:
    assert not standing_spots(twin_sweep(demo_job(name), 1).table).any()


def test_repeats_of_few_angles_are_no_standing_beam() -> None:
    """Four angles, each ten times: every spot comes back, but to four places."""
    stage = [float(a) for a in (0, 3, 6, 9) for _ in range(10)]
    assert not standing_spots(order_table_of(stage, [10.0 * a for a in stage])).any()
    one = order_table_of([5.0] * 20, [40.0] * 20)
    assert not standing_spots(one).any()


def test_spots_that_all_stand_still_say_that_the_part_does_not_turn() -> None:
    job, sweep = coarse_sweep(0)
    n = len(sweep.table)
    stuck = replace(sweep.table, x_mm=np.full(n, 60.0), y_mm=np.zeros(n))
    with pytest.raises(NoResult, match="stands still while the stage says"):
        measure_pitch(stuck, bench=job.bench, part=job.part)
