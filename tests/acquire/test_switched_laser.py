"""A laser that is itself switched starts cold: fit and report know it."""

import numpy as np
import pytest
from builders import demo_job, twin_sweep

from pitchsweep.acquire.fit_input import FitInput
from pitchsweep.acquire.measured_state import measure, surroundings
from pitchsweep.analysis.records import PitchResult
from pitchsweep.configs.job_model import Job


def job_that(switches: str) -> Job:
    job = demo_job("shims-spots")
    emission = job.bench.emission.model_copy(update={"switches": switches})
    bench = job.bench.model_copy(update={"emission": emission})
    return job.model_copy(update={"bench": bench})


def fitted(job: Job) -> PitchResult:
    table = twin_sweep(demo_job("shims-spots"), 1).table
    return measure(FitInput("a", table, job.bench, job.part, 0.95))


def test_its_wavelength_is_known_less_well_and_the_result_says_so() -> None:
    """A relative 0.3 nm / 632.99 nm of the wavelength is as much of the pitch (C)."""
    warm, cold = fitted(job_that("head-shutter")), fitted(job_that("laser"))
    added = float(np.sqrt(cold.u_pitch_nm**2 - warm.u_pitch_nm**2))
    assert added / cold.pitch_nm == pytest.approx(0.3 / 632.9908, rel=0.02)
    assert not any("switched" in text for text in warm.warnings)
    assert any("known to 0.3 nm less well" in text for text in cold.warnings)


def test_the_files_own_value_stays_in_the_bench() -> None:
    job = job_that("laser")
    given = FitInput("a", twin_sweep(job, 1).table, job.bench, job.part, 0.95)
    widened = surroundings(given).bench.lasers["red"].u_wavelength_nm
    assert widened == pytest.approx(np.hypot(0.3, 0.00095))
    assert given.bench.lasers["red"].u_wavelength_nm == 0.00095
