"""Whole sweeps of frames that hold more than orders: only orders enter the fit."""

from functools import cache

import numpy as np
import pytest
from photon_sweep import PhotonSweep
from scenes import scene_job, scene_sweep, spot_pulls, wrong_spots

from pitchsweep.analysis.measure import measure_pitch
from pitchsweep.analysis.records import PitchResult
from pitchsweep.analysis.report_context import ReportContext
from pitchsweep.analysis.report_page import report_page
from pitchsweep.analysis.result_file import summary_lines
from pitchsweep.drivers.twin.truth import Truth

STEP_DEG = 6.0
SEEDS = {"reflections": 0, "all-marks": 1}


@cache
def swept(scene: str) -> tuple[PhotonSweep, Truth, PitchResult]:
    """A coarse sweep of the scene and what was measured."""
    job = scene_job(scene)
    sweep, truth = scene_sweep(job, SEEDS[scene], STEP_DEG)
    result = measure_pitch(
        sweep.table, bench=job.bench, part=job.part, rejected=sweep.rejected
    )
    return sweep, truth, result


@pytest.mark.parametrize("scene", list(SEEDS))
def test_no_false_order_enters_the_fit_and_the_pitch_is_right(scene: str) -> None:
    """``all-marks``: ghosts, halo, smear, a step of room light, reflections, a lopsided
    profile, camera drift and marks at once."""
    sweep, truth, result = swept(scene)
    assert wrong_spots(sweep, result) == (0, 0)
    assert result.spots_used > 30
    assert abs(result.pitch_nm - truth.pitch_nm) < 3.0 * result.u_pitch_nm
    pulls = np.array(spot_pulls(sweep, result))
    assert np.sqrt(np.mean(pulls**2)) < 1.4


def test_marks_are_seen_in_every_step_and_are_no_spots() -> None:
    sweep, _, _ = swept("all-marks")
    assert all(len(found.marks) == 4 for found in sweep.found)
    for found in sweep.found:
        for mark in found.marks:
            away = [
                np.hypot(s.x_mm - mark.x_mm, s.y_mm - mark.y_mm) for s in found.spots
            ]
            assert min(away, default=np.inf) > 1.0


@pytest.mark.parametrize("scene", list(SEEDS))
def test_beams_that_do_not_go_with_the_part_are_warned_of_first(scene: str) -> None:
    """One stands still, one goes the wrong way by 1.5 mm a degree."""
    _, _, result = swept(scene)
    still, moving = result.warnings[:2]
    assert "an unknown beam stands still" in still
    assert "an unknown beam moves over the screen by " in moving
    rate_mm = float(moving.split(" by ")[1].split(" mm a degree")[0])
    assert -1.9 < rate_mm < -1.1
    told = " ".join(" ".join(summary_lines(result)).split())
    page = report_page(result, ReportContext())
    for words in (
        "an unknown beam stands still at x",
        "an unknown beam moves over the",
    ):
        assert words in told and words in page
