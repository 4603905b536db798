"""Sweeps of the twin with what frames hold beside orders, and how they were read."""

from typing import Any

import numpy as np
from builders import demo_job
from photon_sweep import PhotonSweep, photon_sweep

from pitchsweep.analysis.records import PitchResult
from pitchsweep.configs.job_model import Job
from pitchsweep.drivers.twin.truth import Truth, draw_truth

SCENES: dict[str, dict[str, Any]] = {
    "plain": {},
    "ghosts": {"ghost_fraction": 0.05},
    "halo": {"halo_fraction": 0.1},
    "smear": {"smear_fraction": 0.02},
    "room-light": {"room_light_step_dn_per_s": 400.0},
    "reflections": {"reflection_fraction": 0.05},
    "lopsided": {"lopsided_fraction": 0.01},
    "drift": {"camera_shift_um_per_h": 50.0},
    "drift-marks": {"camera_shift_um_per_h": 50.0},
}
SCENES["all-marks"] = {k: v for effects in SCENES.values() for k, v in effects.items()}
MARKS_MM = ((-190.0, 34.0), (190.0, 34.0), (-190.0, -34.0), (190.0, -34.0))
ROWS_PX = 240
NEAR_MM = 2.0


def scene_job(scene: str) -> Job:
    """A shipped job with the scene's effects and a lower frame."""
    job = demo_job("track-1600-red", effects=SCENES[scene])
    camera = job.bench.camera.model_copy(
        update={"height_px": ROWS_PX, "centre_row_px": (ROWS_PX - 1) / 2.0}
    )
    bench = job.bench.model_copy(update={"camera": camera})
    if scene.endswith("-marks"):
        screen = bench.screen.model_copy(update={"marks_mm": MARKS_MM})
        bench = bench.model_copy(update={"screen": screen})
    return job.model_copy(update={"bench": bench})


def scene_sweep(
    job: Job, seed: int, step_deg: float = 3.0, widest_deg: float = 75.0
) -> tuple[PhotonSweep, Truth]:
    """A sweep up on the even places and down on the odd ones, and its truth."""
    truth = draw_truth(job.bench, job.part, seed)
    up = [float(a) for a in np.arange(-widest_deg, widest_deg + 0.1, step_deg)]
    return photon_sweep(job, truth, up[0::2] + up[1::2][::-1]), truth


def wrong_spots(sweep: PhotonSweep, result: PitchResult) -> tuple[int, int]:
    """Spots of the fit farther than 2 mm from any order; with a wrong order."""
    false = wrong = 0
    table = result.table
    for step, x, y, order in zip(
        table.step, table.x_mm, table.y_mm, table.order, strict=True
    ):
        seen = sweep.steps[int(step)]
        away = np.hypot(*(seen.leaving_mm - np.array([x, y])).T)
        if away.min() > NEAR_MM:
            false += 1
        elif int(seen.leaving[away.argmin()]) != int(order):
            wrong += 1
    return false, wrong


def spot_pulls(sweep: PhotonSweep, result: PitchResult) -> list[float]:
    """(found - true) / stated, x and y, of the spots in the fit that are orders."""
    pulls: list[float] = []
    table = result.table
    for k, step in enumerate(table.step):
        off = sweep.steps[int(step)].leaving_mm - (table.x_mm[k], table.y_mm[k])
        away = np.hypot(*off.T)
        if away.min() < NEAR_MM:
            best = off[away.argmin()]
            pulls += [best[0] / table.ux_mm[k], best[1] / table.uy_mm[k]]
    return pulls
