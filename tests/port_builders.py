"""Ports of an invented bench, for tests in which nothing is opened."""

from typing import Any

from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.ports_model import Ports

STILLS: dict[str, Any] = {
    "by": "http-stills",
    "address": "http://127.0.0.1:9/still.png?us={exposure_us}",
    "automatic_off_seen_on": "2026-01-15",
}


def port_values(**changes: Any) -> dict[str, Any]:
    """The ``ports:`` block of a bench file, with blocks changed."""
    return {
        "stage": {"port": "/dev/null", "dialect": "rotary-line"},
        "unit": {"port": "/dev/zero", "dialect": "emission-line"},
        "camera": STILLS,
        **changes,
    }


def invented_ports(**changes: Any) -> Ports:
    return Ports.model_validate(port_values(**changes))


def with_ports(job: Job, **changes: Any) -> Job:
    """The job on a bench with these ports in the place of its twin; frames recorded."""
    values = {**job.bench.model_dump(), "twin": None, "ports": port_values(**changes)}
    recipe = {**job.recipe.model_dump(), "record": "frames"}
    return Job.model_validate(
        {
            **job.model_dump(),
            "bench": Bench.model_validate(values),
            "recipe": recipe,
        }
    )
