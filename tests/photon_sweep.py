"""A sweep of the twin's frames through the finder into a table, in one process."""

from dataclasses import dataclass

import numpy as np
from twin_photons import SeenStep, seen_step

from pitchsweep.acquire.bench_devices import Shot
from pitchsweep.acquire.fit_input import order_table
from pitchsweep.acquire.journal_rows import StepSpots
from pitchsweep.acquire.spot_places import StepPlace, places_of, rejected_of
from pitchsweep.acquire.step_spots import spot_finder
from pitchsweep.analysis.records import OrderTable, RejectedSpot
from pitchsweep.configs.job_model import Job
from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.twin.truth import Truth


@dataclass(frozen=True)
class PhotonSweep:
    """The table of a sweep, what was refused, and every step's frames and truth."""

    table: OrderTable
    rejected: tuple[RejectedSpot, ...]
    steps: list[SeenStep]
    found: list[StepSpots]


def photon_sweep(
    job: Job, truth: Truth, incidence_deg: list[float], *, hours: float = 1.0
) -> PhotonSweep:
    """Steps at the given incidences, spread evenly over ``hours``.

    A dark frame is taken as often as the recipe says.
    """
    find = spot_finder(job.bench)
    laser = job.recipe.lasers[0]
    steps: list[SeenStep] = []
    rows, rejected = [], []
    for number, incidence in enumerate(incidence_deg):
        at_h = hours * number / len(incidence_deg)
        old = steps[-1].dark if number % job.recipe.dark_every_steps else None
        seen = seen_step(job, truth, incidence, step=number, hours=at_h, dark=old)
        shots = [
            Shot(e.exposure_ms, Label(0, laser, 0, number, k), e.frame)
            for k, e in enumerate(seen.exposures)
        ]
        longest = max(job.recipe.exposures_ms)
        dark = Shot(longest, Label(0, laser, 0, number, 9), seen.dark.astype(np.uint16))
        found = find(number, shots, [dark])
        stage = job.bench.stage.direction * incidence
        place = StepPlace(number, stage, 0.0, laser, 3600.0 * at_h)
        steps.append(seen)
        rows.append((found, place))
        rejected += rejected_of(found, number)
    table = order_table(places_of(rows), (laser,))
    return PhotonSweep(table, tuple(rejected), steps, [found for found, _ in rows])
