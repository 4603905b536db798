"""The twin's frames of single steps, and where its orders truly landed on them."""

from dataclasses import dataclass

import numpy as np

from pitchsweep.analysis.camera_noise import CameraNoise
from pitchsweep.analysis.records import FloatArray, SpotSearch
from pitchsweep.analysis.speckle_grain import Speckle
from pitchsweep.analysis.spot_search import Exposure, find_spots
from pitchsweep.configs.job_model import Job
from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.twin.effects import single_step
from pitchsweep.drivers.twin.optics import trace_orders
from pitchsweep.drivers.twin.photons_door import pixel_of, render
from pitchsweep.drivers.twin.screen import on_hole, on_screen
from pitchsweep.drivers.twin.truth import Truth


@dataclass(frozen=True)
class SeenStep:
    """A step's bracket and the true places of its orders, (orders, 2) px and mm."""

    exposures: list[Exposure]
    dark: FloatArray
    place_px: FloatArray
    place_mm: FloatArray
    order: FloatArray


def seen_step(
    job: Job,
    truth: Truth,
    incidence_deg: float,
    *,
    step: int = 0,
    repeat: int = 0,
    hours: float = 0.0,
    stage_deg: float | None = None,
) -> SeenStep:
    """Frames and truth of one step of the first mount and laser of ``job``."""
    bench, laser = job.bench, job.recipe.lasers[0]
    stage = job.bench.stage.direction * incidence_deg
    stage = stage if stage_deg is None else stage_deg
    labels = [
        Label(0, laser, repeat, step, e, 3600.0 * hours)
        for e in range(len(job.recipe.exposures_ms))
    ]
    frames = [
        render(
            truth,
            bench,
            label,
            stage_deg=stage,
            mount_deg=0.0,
            exposure_ms=time_ms,
            light_on=True,
        )
        for label, time_ms in zip(labels, job.recipe.exposures_ms, strict=True)
    ]
    longest = max(job.recipe.exposures_ms)
    dark = render(
        truth,
        bench,
        labels[0],
        stage_deg=stage,
        mount_deg=0.0,
        exposure_ms=longest,
        light_on=False,
    )
    landing = trace_orders(
        truth, bench, single_step(labels[0], stage_deg=stage, mount_deg=0.0)
    )
    place = landing.place_mm[0]
    seen = landing.visible[0] & on_screen(bench, place) & ~on_hole(bench, place, 1.5)
    order = np.broadcast_to(landing.order, landing.share.shape)[0]
    return SeenStep(
        exposures=[
            Exposure(f, t) for f, t in zip(frames, job.recipe.exposures_ms, strict=True)
        ],
        dark=dark.astype(np.float64),
        place_px=pixel_of(bench.camera, place)[seen],
        place_mm=place[seen],
        order=order[seen].astype(np.float64),
    )


def search_step(
    job: Job, step: SeenStep, number: int, speckle: Speckle | None = None
) -> SpotSearch:
    """The finder on the step, with the bench's camera."""
    noise = CameraNoise.from_bench(job.bench.camera)
    dark = step.dark.astype(np.float32)
    return find_spots(step.exposures, dark, noise, number, speckle=speckle)
