"""A job: bench + part + recipe. A job file names them; a frozen job holds them.

A lot is several parts, or several places of a part, that one job seats in turn, every
one with all mounts of the recipe. Mounts are numbered on through the lot.
"""

from typing import Annotated, Any, Self

from pydantic import (
    Field,
    SerializerFunctionWrapHandler,
    model_serializer,
    model_validator,
)

from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part
from pitchsweep.configs.recipe_model import Recipe
from pitchsweep.configs.schedule_model import Schedule
from pitchsweep.configs.settings_base import Name, Settings, Text

MOST_SEATED = 32


class Seating(Settings):
    """One part of a lot, by its file; ``place`` is the place measured, if another."""

    part: Text
    place: Text | None = None


class JobFile(Settings):
    """What a job file says: file names beside it, and when it is to run.

    In place of ``part`` there may be a ``lot``, the parts in the order in which they
    are seated; those with a certified pitch are its references.
    """

    job: Name
    note: Text | None = None
    bench: Text
    part: Text | None = None
    lot: Annotated[tuple[Seating, ...], Field(max_length=MOST_SEATED)] = ()
    recipe: Text
    schedule: Schedule = Schedule()

    @model_validator(mode="after")
    def _a_part_or_a_lot(self) -> Self:
        if (self.part is None) == (not self.lot):
            raise ValueError(
                "a job names a 'part', or a 'lot' of parts, one of the two"
            )
        return self


class Job(Settings):
    """A complete job, as frozen into a run folder's ``job.yaml``.

    ``part`` is what the run is about: of a lot the first without certified pitch.
    """

    job: Name
    note: Text | None = None
    bench: Bench
    part: Part
    lot: Annotated[tuple[Part, ...], Field(max_length=MOST_SEATED)] = ()
    recipe: Recipe
    schedule: Schedule = Schedule()

    @property
    def parts(self) -> tuple[Part, ...]:
        """The different parts, that which the run is about first."""
        return tuple(dict.fromkeys((self.part, *self.lot)))

    @property
    def seated(self) -> tuple[Part, ...]:
        """The parts in the order in which they are seated, some perhaps again."""
        return self.lot or (self.part,)

    def part_in(self, mount: int) -> Part:
        """The part in mount number ``mount``, counted through the lot."""
        return self.seated[self.seat_of(mount)]

    def seat_of(self, mount: int) -> int:
        """Which of ``seated`` is in mount number ``mount``."""
        return mount // len(self.recipe.mounts_deg)

    @model_serializer(mode="wrap")
    def _one_part_as_ever(self, handler: SerializerFunctionWrapHandler) -> Any:
        """A job without a lot keeps its fingerprint of before there were lots."""
        values = handler(self)
        if not self.lot:
            values.pop("lot", None)
        return values

    @model_validator(mode="after")
    def _a_lot_is_about_something(self) -> Self:
        if not self.lot:
            return self
        open_ones = [part for part in self.lot if part.certified is None]
        if not open_ones:
            raise ValueError(
                "every part of the lot has a certified pitch; one to be measured is"
                " needed"
            )
        if open_ones[0] != self.part:
            raise ValueError(
                "'part' must be the first of the lot without certified pitch"
            )
        if self.schedule.enough_relative_u is not None:
            raise ValueError(
                "schedule.enough_relative_u would end a lot before its last part:"
                " leave it out"
            )
        return self

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
