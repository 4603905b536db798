"""How to sweep: angles, mounts, lasers, exposures, what is recorded."""

from typing import Annotated, Literal, Self

from pydantic import AfterValidator, Field, model_validator

from pitchsweep.configs.fault_policies import FaultPolicies
from pitchsweep.configs.settings_base import AngleDeg, Name, Settings, Text


def _half_turns(value: float) -> float:
    if value in (0.0, 180.0):
        return value
    raise ValueError("allowed 0 or 180: half turns keep the orders on the screen")


FaceDeg = Annotated[float, AfterValidator(_half_turns)]
ExposureMs = Annotated[float, Field(gt=0.0, le=60000.0)]


class Recipe(Settings):
    """A sweep of incidence from ``start_deg`` to ``stop_deg``, relative to each mount.

    The stage goes to ``mount_deg + direction * incidence``. ``angle_order`` is the
    order of the steps in time; every angle is approached from the same side. Repeat r
    shifts the whole grid by r * ``repeat_shift_deg``: by a spot width or more, so that
    the speckle is another. Between mounts the sweep waits, dark, until a person has
    seated the part anew and said so. ``faces_deg``, one a mount, says how far it is
    turned in its own plane, about its normal, against the first (all 0 where left out).
    """

    recipe: Name
    note: Text | None = None
    lasers: Annotated[tuple[Name, ...], Field(min_length=1, max_length=8)]
    mounts_deg: Annotated[tuple[AngleDeg, ...], Field(min_length=1, max_length=8)] = (
        0.0,
    )
    faces_deg: Annotated[tuple[FaceDeg, ...], Field(max_length=8)] = ()
    start_deg: Annotated[float, Field(ge=-89.0, le=89.0)]
    stop_deg: Annotated[float, Field(ge=-89.0, le=89.0)]
    step_deg: Annotated[float, Field(ge=0.01, le=45.0)]
    repeats: Annotated[int, Field(ge=1, le=50)] = 1
    repeat_shift_deg: Annotated[float, Field(ge=0.0, le=5.0)] = 0.2
    angle_order: Literal["up-down", "shuffled", "up"] = "up-down"
    record: Literal["frames", "spots"] = "frames"
    exposures_ms: Annotated[tuple[ExposureMs, ...], Field(min_length=1, max_length=6)]
    dark_every_steps: Annotated[int, Field(ge=1, le=1000)] = 10
    coverage: Annotated[float, Field(ge=0.5, le=0.9999)] = 0.95
    faults: FaultPolicies = FaultPolicies()

    @model_validator(mode="after")
    def _angles_run_upwards(self) -> Self:
        if self.start_deg >= self.stop_deg:
            raise ValueError("start_deg must be below stop_deg")
        if len(set(self.exposures_ms)) != len(self.exposures_ms):
            raise ValueError("exposures_ms must differ from each other")
        if len(set(self.lasers)) != len(self.lasers):
            raise ValueError("lasers must differ from each other")
        if self.faces_deg and len(self.faces_deg) != len(self.mounts_deg):
            raise ValueError("faces_deg must have one entry for each of mounts_deg")
        count = len(self.mounts_deg)
        seats = {(m % 360.0, self.face_of(i)) for i, m in enumerate(self.mounts_deg)}
        if len(seats) != count:
            raise ValueError(
                "mounts_deg must differ from each other, or their faces_deg"
            )
        if (self.repeats - 1) * self.repeat_shift_deg >= self.step_deg:
            raise ValueError(
                "repeats shifted by repeat_shift_deg must stay within one step_deg: "
                "lower repeats or repeat_shift_deg"
            )
        return self

    def face_of(self, mount: int) -> float:
        """How far the part is turned in its own plane in mount number ``mount``."""
        return self.faces_deg[mount % len(self.faces_deg)] if self.faces_deg else 0.0

    def mount_deg_of(self, mount: int) -> float:
        """The angle of mount number ``mount``, counted through a lot."""
        return self.mounts_deg[mount % len(self.mounts_deg)]
