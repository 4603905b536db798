"""What the program advises, against sweeps that take the advice."""

import re
from dataclasses import replace

import numpy as np
import pytest
from builders import demo_job, twin_sweep

from pitchsweep.analysis.analysis_errors import NoResult
from pitchsweep.analysis.measure import measure_pitch
from pitchsweep.analysis.records import PitchResult
from pitchsweep.configs.job_model import Job

SEED = 3


def measured(job: Job, mounts_deg: tuple[float, ...] | None = None) -> PitchResult:
    sweep = twin_sweep(job, SEED, mounts_deg=mounts_deg)
    return measure_pitch(sweep.table, bench=job.bench, part=job.part)


def promised_nm(result: PitchResult, words: str) -> float:
    """The u that the sentence beginning with ``words`` promises."""
    sentence = next(s for s in result.advice if s.startswith(words))
    found = re.search(r"from ([0-9.]+) to ([0-9.]+) nm", sentence)
    assert found
    assert float(found[1]) == pytest.approx(result.u_pitch_nm, rel=0.06)
    return float(found[2])


def test_three_more_mounts_bring_what_was_promised() -> None:
    before = measured(demo_job("shims-spots"))
    after = measured(demo_job("shims-four-mounts"))
    promised = promised_nm(before, "three more mounts")
    assert promised == pytest.approx(after.u_pitch_nm, rel=0.1)


def test_a_mount_half_a_turn_away_brings_what_was_promised() -> None:
    job = demo_job("shims-spots")
    promised = promised_nm(measured(job), "a mount half a turn away")
    assert promised == pytest.approx(measured(job, (0.0, 180.0)).u_pitch_nm, rel=0.1)


def test_a_wider_sweep_of_all_mounts_brings_what_was_promised() -> None:
    job = demo_job("shims-four-mounts")
    wider = demo_job("shims-four-mounts", recipe={"start_deg": -75.0, "stop_deg": 75.0})
    promised = promised_nm(measured(job), "sweeping out to 75 degrees")
    assert promised == pytest.approx(measured(wider).u_pitch_nm, rel=0.15)


def test_no_mount_is_advised_where_four_are_there() -> None:
    result = measured(demo_job("shims-four-mounts"))
    assert not any("mount" in sentence for sentence in result.advice[1:])


def test_no_mount_is_advised_that_the_stage_cannot_reach() -> None:
    job = demo_job("shims-spots")
    stage = job.bench.stage.model_copy(
        update={"travel_min_deg": -60.0, "travel_max_deg": 60.0}
    )
    result = measured(demo_job("shims-spots", bench={"stage": stage}))
    assert result.advice
    assert not any("mount" in sentence for sentence in result.advice)


def test_the_weak_side_is_named_with_what_knowing_it_would_bring() -> None:
    result = measured(demo_job("shims-spots"))
    assert result.advice[0].startswith("the pitch trades against stage error, 1 per")
    most = max(result.nuisance, key=lambda nuisance: abs(nuisance.correlation))
    assert most.name in result.advice[0]
    assert 0.3 < abs(most.correlation) <= 1.0


def test_an_undetermined_pitch_is_refused_with_what_it_trades_against() -> None:
    """One angle, and nobody measured the screen distance."""
    job = demo_job("shims-spots")
    screen = job.bench.screen.model_copy(update={"u_distance_mm": 100.0})
    sweep = twin_sweep(job, SEED)
    told = replace(sweep.table, order=sweep.true_order)
    table = told.take(np.flatnonzero(sweep.true_order == 1)[:1])
    bench = job.bench.model_copy(update={"screen": screen})
    with pytest.raises(NoResult, match="uncertain(.|\n)*screen distance"):
        measure_pitch(table, bench=bench, part=job.part)


def test_budget_says_what_a_line_is_and_how_the_pitch_depends_on_it() -> None:
    """The pitch grows as the wavelength does: 835.97 nm / 632.99 nm a nm."""
    result = measured(demo_job("shims-spots"))
    details = {line.source: line.detail for line in result.budget}
    assert all(details.values())
    assert details["laser wavelength"].endswith("u 0.00095 nm, 1.3 nm per nm")
