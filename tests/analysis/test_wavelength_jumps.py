"""Mode hops: found in the spots, carried by the fit, told from a camera that moved."""

from dataclasses import replace

import numpy as np
import pytest
from builders import demo_job, planned_incidence_deg, twin_sweep

from pitchsweep.analysis.fit_parameters import Source
from pitchsweep.analysis.fit_with_jumps import OVERLOOKED, UNCARRIED
from pitchsweep.analysis.measure import measure_pitch
from pitchsweep.analysis.records import OrderTable, PitchResult, Rejection
from pitchsweep.configs.job_model import Job
from pitchsweep.drivers.twin.effects import LaserState, Steps
from pitchsweep.drivers.twin.spots_door import sweep_spots
from pitchsweep.drivers.twin.truth import draw_truth

JOB = demo_job(
    "shims-spots",
    twin={"spot_reading_mm": 0.03},
    recipe={"start_deg": -60.0, "stop_deg": 60.0, "step_deg": 1.5},
)
RED_NM = JOB.bench.lasers["red"].vacuum_wavelength_nm


def hopping(job: Job, seed: int, hops: dict[int, float]) -> tuple[OrderTable, float]:
    """A sweep whose laser is off by so many pm from a step on, and the true pitch."""
    whole = twin_sweep(job, seed)
    incidence = planned_incidence_deg(job)
    bounds = [0, *hops, len(incidence)]
    shifts = [0.0, *hops.values()]
    truth = draw_truth(job.bench, job.part, seed)
    pieces = []
    for first, last, shift_pm in zip(bounds[:-1], bounds[1:], shifts, strict=True):
        step = np.arange(first, last)
        steps = Steps(
            mount=0,
            mount_deg=job.recipe.mounts_deg[0],
            laser="red",
            repeat=0,
            step=step,
            stage_deg=job.recipe.mounts_deg[0] + incidence[first:last],
            planned_s=3.0 * step,
            laser_state=LaserState(shift_pm=shift_pm),
        )
        pieces.append(sweep_spots(truth, job.bench, steps))
    x_mm = np.concatenate([piece.x_mm for piece in pieces])
    y_mm = np.concatenate([piece.y_mm for piece in pieces])
    assert len(x_mm) == len(whole.table), "a hop brought a spot onto the screen"
    return replace(whole.table, x_mm=x_mm, y_mm=y_mm), truth.pitch_nm


def measured(table: OrderTable, job: Job = JOB) -> PitchResult:
    return measure_pitch(table, bench=job.bench, part=job.part, advise=False)


@pytest.mark.parametrize(("seed", "hop_pm"), [(0, 100.0), (1, -150.0), (2, 300.0)])
def test_a_hop_is_found_where_it_was_and_the_pitch_holds(
    seed: int, hop_pm: float
) -> None:
    table, pitch_nm = hopping(JOB, seed, {40: hop_pm})
    result = measured(table)
    (jump,) = result.jumps
    assert abs(jump.step - 40) <= 3 and jump.laser == "red"
    assert abs(jump.size_pm - hop_pm) < 4.0 * jump.u_pm
    assert abs(result.pitch_nm - pitch_nm) < 3.0 * result.u_pitch_nm
    assert any(r.reason is Rejection.LASER_JUMP for r in result.rejected)
    assert any("jumped" in text for text in result.warnings)
    assert any(line.source == Source.JUMP for line in result.budget)


def test_a_hop_back_is_a_second_jump_of_the_other_sign() -> None:
    table, pitch_nm = hopping(JOB, 0, {40: 150.0, 65: 0.0})
    result = measured(table)
    first, second = result.jumps
    assert abs(first.step - 40) <= 3 and abs(second.step - 65) <= 3
    assert first.size_pm > 80.0 and second.size_pm < -80.0
    assert abs(result.pitch_nm - pitch_nm) < 3.0 * result.u_pitch_nm


def test_a_sweep_without_hops_shows_none() -> None:
    for seed in (0, 1):
        sweep = twin_sweep(JOB, seed)
        assert measured(sweep.table).jumps == ()


def test_a_camera_that_moved_is_not_taken_for_the_laser() -> None:
    sweep = twin_sweep(JOB, 0)
    table = sweep.table
    result = measured(replace(table, x_mm=table.x_mm + 0.3 * (table.step >= 40)))
    assert result.jumps == ()
    assert any("the picture had moved by 0." in text for text in result.warnings)
    assert any(line.source == UNCARRIED for line in result.budget)
    assert abs(result.pitch_nm - sweep.truth.pitch_nm) < 3.0 * result.u_pitch_nm


def test_a_laser_that_may_jump_brings_a_line_for_hops_too_small_to_be_seen() -> None:
    red = JOB.bench.lasers["red"].model_copy(update={"may_jump": True})
    bench = JOB.bench.model_copy(update={"lasers": {"red": red}})
    job = JOB.model_copy(update={"bench": bench})
    table, pitch_nm = hopping(job, 1, {40: 30.0})
    result = measured(table, job)
    assert result.jumps == ()
    (line,) = [line for line in result.budget if line.source == OVERLOOKED]
    # Half of the hop moves the pitch, when it comes in the middle of the sweep.
    assert line.u_nm > 0.5 * 0.5 * pitch_nm * 0.03 / RED_NM
    assert abs(result.pitch_nm - pitch_nm) < 3.0 * result.u_pitch_nm
