"""A job: bench + part + recipe. A job file names them; a frozen job holds them."""

from typing import Self

from pydantic import model_validator

from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part
from pitchsweep.configs.recipe_model import Recipe
from pitchsweep.configs.schedule_model import Schedule
from pitchsweep.configs.settings_base import Name, Settings, Text


class JobFile(Settings):
    """What a job file says: three file names beside it, and when it is to run."""

    job: Name
    note: Text | None = None
    bench: Text
    part: Text
    recipe: Text
    schedule: Schedule = Schedule()


class Job(Settings):
    """A complete job, as frozen into a run folder's ``job.yaml``."""

    job: Name
    note: Text | None = None
    bench: Bench
    part: Part
    recipe: Recipe
    schedule: Schedule = Schedule()

    @model_validator(mode="after")
    def _recipe_fits_bench(self) -> Self:
        for laser in self.recipe.lasers:
            if laser not in self.bench.lasers:
                known = ", ".join(sorted(self.bench.lasers))
                raise ValueError(f"recipe names laser '{laser}'; the bench has {known}")
        return self

    @model_validator(mode="after")
    def _hardware_can_do_it(self) -> Self:
        ports = self.bench.ports
        if ports is None:
            return self
        if self.recipe.record == "spots":
            raise ValueError(
                "recipe.record is spots, which a simulated bench alone can tell; a"
                " bench with ports records frames"
            )
        fixed_ms = ports.camera.fixed_exposure_ms
        if fixed_ms is not None and self.recipe.exposures_ms != (fixed_ms,):
            raise ValueError(
                f"the camera's exposure is fixed at {fixed_ms:g} ms:"
                f" recipe.exposures_ms must be [{fixed_ms:g}]"
            )
        return self
