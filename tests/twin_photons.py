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
    """A step's bracket and the true places of its orders, (orders, 2) px and mm.

    ``leaving_mm`` and ``leaving`` hold every order that leaves, on the screen or off it
    or in the hole.
    """

    exposures: list[Exposure]
    dark: FloatArray
    place_px: FloatArray
    place_mm: FloatArray
    order: FloatArray
    leaving_mm: FloatArray
    leaving: FloatArray


def seen_step(
    job: Job,
    truth: Truth,
    incidence_deg: float,
    *,
    step: int = 0,
    repeat: int = 0,
    hours: float = 0.0,
    stage_deg: float | None = None,
    dark: FloatArray | None = None,
) -> SeenStep:
    """Frames and truth of one step of the first mount and laser of ``job``.

    ``dark``: one taken before, where no new one is to be.
    """
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
    if dark is None:
        dark = _dark(job, truth, labels[0], stage)
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
        dark=dark,
        place_px=pixel_of(bench.camera, place)[seen],
        place_mm=place[seen],
        order=order[seen].astype(np.float64),
        leaving_mm=place[landing.visible[0]],
        leaving=order[landing.visible[0]].astype(np.float64),
    )


def _dark(job: Job, truth: Truth, label: Label, stage_deg: float) -> FloatArray:
    frame = render(
        truth,
        job.bench,
        label,
        stage_deg=stage_deg,
        mount_deg=0.0,
        exposure_ms=max(job.recipe.exposures_ms),
        light_on=False,
    )
    return frame.astype(np.float64)


def search_step(
    job: Job, step: SeenStep, number: int, speckle: Speckle | None = None
) -> SpotSearch:
    """The finder on the step, with the bench's camera."""
    noise = CameraNoise.from_bench(job.bench.camera)
    dark = step.dark.astype(np.float32)
    return find_spots(step.exposures, dark, noise, number, speckle=speckle)
