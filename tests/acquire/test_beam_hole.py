"""Spots at the beam hole: what it takes does not pull them, cut ones are refused."""

import numpy as np
import pytest
from builders import demo_job
from twin_photons import seen_step

from pitchsweep.acquire.bench_devices import Shot
from pitchsweep.acquire.journal_rows import StepSpots
from pitchsweep.acquire.step_spots import spot_finder
from pitchsweep.analysis.records import FloatArray, Rejection
from pitchsweep.configs.bench_model import Hole
from pitchsweep.configs.job_model import Job
from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.twin.truth import draw_truth

INCIDENCE_DEG = 20.0


def job_with_hole(x_mm: float, y_mm: float, diameter_mm: float) -> Job:
    job = demo_job("track-1600-red", effects={"speckle_contrast": 0.0})
    hole = Hole(x_mm=x_mm, y_mm=y_mm, diameter_mm=diameter_mm)
    screen = job.bench.screen.model_copy(update={"hole": hole})
    return job.model_copy(
        update={"bench": job.bench.model_copy(update={"screen": screen})}
    )


def found_beside(hole_from_edge_mm: float) -> tuple[StepSpots, FloatArray]:
    """The step with a hole whose edge lies so far from the brightest order's middle.

    Also that order's true place in mm.
    """
    plain = job_with_hole(0.0, 0.0, 8.0)
    truth = draw_truth(plain.bench, plain.part, 2)
    seen = seen_step(plain, truth, INCIDENCE_DEG)
    place = seen.place_mm[int(np.argmin(np.abs(seen.order)))]
    x_mm, y_mm = float(place[0]) + 4.0 + hole_from_edge_mm, float(place[1])
    job = job_with_hole(x_mm, y_mm, 8.0)
    step = seen_step(job, truth, INCIDENCE_DEG)
    shots = [
        Shot(e.exposure_ms, Label(0, "red", 0, 0, k), e.frame)
        for k, e in enumerate(step.exposures)
    ]
    dark = Shot(20.0, Label(0, "red", 0, 0, 9), step.dark.astype(np.uint16))
    return spot_finder(job.bench)(0, shots, [dark]), place


@pytest.mark.parametrize("away_mm", [1.9, 2.5])
def test_wings_in_the_hole_do_not_pull_a_spot(away_mm: float) -> None:
    """Radii of the spot are 0.85 mm: a tenth to a hundredth of its light is gone."""
    found, place = found_beside(away_mm)
    off = [np.array([s.x_mm, s.y_mm]) - place for s in found.spots]
    nearest = int(np.argmin([np.hypot(*o) for o in off]))
    spot = found.spots[nearest]
    assert abs(off[nearest][0]) < 4.0 * spot.ux_mm < 0.02
    assert abs(off[nearest][1]) < 4.0 * spot.uy_mm < 0.02


@pytest.mark.parametrize("away_mm", [0.4, 1.2])
def test_a_spot_cut_in_its_core_is_refused_as_on_the_hole(away_mm: float) -> None:
    found, place = found_beside(away_mm)
    assert all(np.hypot(s.x_mm - place[0], s.y_mm - place[1]) > 3 for s in found.spots)
    assert Rejection.ON_HOLE.value in [r.reason for r in found.rejected]
