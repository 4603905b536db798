"""Marks on the screen frame tell how the camera moved; the table is freed of it."""

import numpy as np
import pytest
from builders import demo_job
from twin_photons import SeenStep, seen_step

from pitchsweep.acquire.bench_devices import Shot
from pitchsweep.acquire.journal_rows import StepSpots
from pitchsweep.acquire.spot_places import StepPlace, places_of
from pitchsweep.acquire.step_spots import spot_finder
from pitchsweep.analysis.mark_drift import MarkPlace, drifts
from pitchsweep.configs.job_model import Job
from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.twin.truth import draw_truth

MARKS_MM = ((-190.0, 55.0), (190.0, 55.0), (-190.0, -55.0), (190.0, -55.0))
HOURS = (0.0, 0.5, 1.0)


def drifting_job(marks: bool) -> Job:
    """Half a millimetre and 200 ppm an hour, no speckle: drift is all there is."""
    job = demo_job(
        "track-1600-red",
        effects={
            "camera_shift_um_per_h": 500.0,
            "camera_scale_ppm_per_h": 200.0,
            "speckle_contrast": 0.0,
        },
    )
    screen = job.bench.screen.model_copy(update={"marks_mm": MARKS_MM if marks else ()})
    return job.model_copy(
        update={"bench": job.bench.model_copy(update={"screen": screen})}
    )


def found_in(job: Job, step: SeenStep, number: int) -> StepSpots:
    shots = [
        Shot(e.exposure_ms, Label(0, "red", 0, number, k), e.frame)
        for k, e in enumerate(step.exposures)
    ]
    dark = Shot(20.0, Label(0, "red", 0, number, 9), step.dark.astype(np.uint16))
    return spot_finder(job.bench)(number, shots, [dark])


def wandering_mm(marks: bool) -> float:
    """How far the same order of the same step is seen apart in an hour."""
    job = drifting_job(marks)
    truth = draw_truth(job.bench, job.part, 3)
    steps = []
    for number, hours in enumerate(HOURS):
        seen = seen_step(job, truth, 20.0, step=0, hours=hours)
        found = found_in(job, seen, number)
        assert len(found.marks) == (len(MARKS_MM) if marks else 0)
        assert len(found.spots) == len(seen.place_px)
        steps.append((found, StepPlace(number, 20.0, 0.0, "red")))
    places = places_of(steps)
    first, last = (
        sorted((p.x_mm, p.y_mm) for p in places if p.step == k)
        for k in (0, len(HOURS) - 1)
    )
    return float(np.abs(np.array(last) - np.array(first)).max())


def test_marks_free_the_places_of_the_camera_s_drift() -> None:
    assert wandering_mm(marks=False) > 0.2
    assert wandering_mm(marks=True) < 0.03


def test_shift_and_scale_are_those_put_in() -> None:
    at = [(-200.0, 60.0), (200.0, 60.0), (-200.0, -60.0), (200.0, -60.0)]

    def step(shift: float, scale: float) -> list[MarkPlace]:
        grown = [((1 + scale) * x + shift, (1 + scale) * y - shift) for x, y in at]
        return [MarkPlace(k, x, y, 0.01) for k, (x, y) in enumerate(grown)]

    steps = [step(0.05, 1e-4), step(0.0, 0.0), step(-0.05, -1e-4), []]
    first, middle, last, none = drifts(steps)
    assert none is None
    assert first is not None and middle is not None and last is not None
    assert first.shift_mm == pytest.approx((0.05, -0.05), abs=1e-9)
    assert last.scale == pytest.approx(-1e-4, abs=1e-9)
    assert middle.undone(17.0, -3.0) == pytest.approx((17.0, -3.0))
    assert first.undone((1 + 1e-4) * 80.0 + 0.05, -0.05) == pytest.approx((80.0, 0.0))
    assert drifts(steps[::-1])[::-1] == [first, middle, last, none]


def test_a_gain_that_the_bench_file_states_ten_times_too_low_is_noticed() -> None:
    """Without that the stated errors of bright spots would be three times too small."""
    job = demo_job("track-1600-red", effects={"speckle_contrast": 0.0})
    truth = draw_truth(job.bench, job.part, 3)
    seen = seen_step(job, truth, 0.0)
    right = found_in(job, seen, 0)
    camera = job.bench.camera.model_copy(update={"gain_dn_per_e": 0.04})
    bench = job.bench.model_copy(update={"camera": camera})
    wrong = found_in(job.model_copy(update={"bench": bench}), seen, 0)
    u_right = [spot.ux_mm for spot in right.spots]
    u_wrong = [spot.ux_mm for spot in wrong.spots]
    assert u_wrong == pytest.approx(u_right, rel=0.25)
