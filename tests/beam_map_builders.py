"""Benches with this or that around the part, for the tests of the beam map."""

from collections.abc import Sequence
from typing import Any

from builders import demo_job

from pitchsweep.configs.enclosure_model import Enclosure, PartMount, Sector, Surface
from pitchsweep.configs.job_model import Job


def sector(west: float, east: float, low: float, high: float) -> dict[str, float]:
    """The keys of a sector: azimuth from west to east, elevation from low to high."""
    turn = 360.0 if east > 360.0 else 0.0
    return {
        "azimuth_from_deg": west - turn,
        "azimuth_to_deg": east - turn,
        "elevation_from_deg": low,
        "elevation_to_deg": high,
    }


def surface(
    name: str, west: float, east: float, low: float, high: float, **keys: Any
) -> Surface:
    """A surface, a wall that is a stop if nothing else is said."""
    if isinstance(keys.get("throws_into"), tuple):
        keys["throws_into"] = Sector(**sector(*keys["throws_into"]))
    said = {"what": "wall", "acts_as": "stop", **keys}
    return Surface(name=name, **sector(west, east, low, high), **said)


ALL_ROUND = surface("walls", -180.0, 180.0, -90.0, 90.0)


def enclosure(surfaces: Sequence[Surface], **keys: Any) -> Enclosure:
    """A class 1 enclosure with a black mount, if nothing else is said."""
    said = {
        "declared_class": 1,
        "power_ceiling_mw": 1e3,
        "beam_height_mm": 950.0,
        "mount": PartMount(acts_as="stop"),
        **keys,
    }
    return Enclosure(surfaces=tuple(surfaces), **said)


def job_within(
    surfaces: Sequence[Surface],
    *,
    name: str = "shims-spots",
    step_deg: float = 1.0,
    **keys: Any,
) -> Job:
    """A shipped job with other surroundings; ``keys`` go to the enclosure."""
    return demo_job(
        name,
        bench={"enclosure": enclosure(surfaces, **keys)},
        recipe={"step_deg": step_deg},
    )


def with_laser(job: Job, name: str, **changes: Any) -> Job:
    """``job`` with one laser changed."""
    lasers = dict(job.bench.lasers)
    lasers[name] = lasers[name].model_copy(update=changes)
    bench = job.bench.model_copy(update={"lasers": lasers})
    return job.model_copy(update={"bench": bench})
