"""Data builders for the tests: order tables from the twin's spots door."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from pitchsweep.analysis.records import UNKNOWN_ORDER, IntArray, OrderTable
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.reader import read_job
from pitchsweep.drivers.twin.effects import Steps
from pitchsweep.drivers.twin.spots_door import sweep_spots
from pitchsweep.drivers.twin.truth import Truth, draw_truth


@dataclass(frozen=True)
class TwinSweep:
    """A sweep seen through the spots door, its truth, and the true orders."""

    table: OrderTable
    truth: Truth
    true_order: IntArray


def demo_job(name: str, **changes: dict[str, Any]) -> Job:
    """A shipped job; ``twin``, ``effects``, ``bench``, ``part``, ``recipe`` changed."""
    job = read_job(f"demo:{name}").job
    bench, twin = job.bench, job.bench.twin
    assert twin is not None
    effects = twin.effects.model_copy(update=changes.get("effects", {}))
    twin = twin.model_copy(update={"effects": effects, **changes.get("twin", {})})
    bench = bench.model_copy(update={"twin": twin, **changes.get("bench", {})})
    part = job.part.model_copy(update=changes.get("part", {}))
    recipe = job.recipe.model_copy(update=changes.get("recipe", {}))
    return job.model_copy(update={"bench": bench, "part": part, "recipe": recipe})


def planned_incidence_deg(job: Job) -> "np.ndarray[tuple[int], np.dtype[np.float64]]":
    """Incidences up on the even places, down on the odd ones."""
    recipe = job.recipe
    count = int(round((recipe.stop_deg - recipe.start_deg) / recipe.step_deg)) + 1
    up = recipe.start_deg + recipe.step_deg * np.arange(count)
    return np.concatenate([up[0::2], up[1::2][::-1]])


def twin_sweep(
    job: Job,
    seed: int,
    *,
    mounts_deg: Sequence[float] | None = None,
    pace_s: float = 3,
    first_mount: int = 0,
    first_step: int = 0,
    faces_deg: Sequence[float] = (),
) -> TwinSweep:
    """All mounts of a job, one laser, steps in an up-down order, orders blanked.

    ``first_mount`` and ``first_step`` number on from an earlier sweep of the same seed,
    so that seats and noise are fresh and time goes on. ``faces_deg`` (one a mount) are
    turns in the part's own plane.
    """
    truth = draw_truth(job.bench, job.part, seed)
    incidence = planned_incidence_deg(job)
    laser = job.recipe.lasers[0]
    sweeps, faces, first = [], [], first_step
    for index, mount in enumerate(mounts_deg or job.recipe.mounts_deg, first_mount):
        step = first + np.arange(len(incidence))
        stage = mount + job.bench.stage.direction * incidence
        steps = Steps(
            mount=index,
            mount_deg=mount,
            laser=laser,
            repeat=0,
            step=step,
            stage_deg=stage,
            planned_s=pace_s * step,
            face_deg=faces_deg[index - first_mount] if faces_deg else 0.0,
        )
        sweeps.append(sweep_spots(truth, job.bench, steps))
        faces.append(np.full(len(sweeps[-1].step), steps.face_deg))
        first += len(incidence)

    def column(name: str) -> Any:
        return np.concatenate([getattr(sweep, name) for sweep in sweeps])

    n = len(column("step"))
    table = OrderTable(
        step=column("step"),
        stage_deg=column("stage_deg"),
        mount_deg=column("mount_deg"),
        laser=np.zeros(n, dtype=np.int64),
        laser_names=(laser,),
        order=np.full(n, UNKNOWN_ORDER, dtype=np.int64),
        x_mm=column("x_mm"),
        y_mm=column("y_mm"),
        ux_mm=column("ux_mm"),
        uy_mm=column("uy_mm"),
        cxy_mm2=np.zeros(n),
        brightness=column("brightness"),
        time_s=pace_s * column("step"),
        face_deg=np.concatenate(faces) if faces_deg else None,
    )
    return TwinSweep(table, truth, column("order"))
