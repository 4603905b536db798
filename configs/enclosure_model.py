"""What stands around the part, as seen from it, and what each thing does to a beam.

Directions are seen from the part: azimuth in degrees about the stage axis, 0 towards
the laser and the screen (+z), 90 towards +x, 180 the way of the beam; elevation in
degrees above the beam plane. What is not declared stops nothing.
"""

from typing import Annotated, Literal, Self

from pydantic import Field, model_validator

from pitchsweep.configs.settings_base import (
    AngleDeg,
    Fraction,
    Name,
    NotTruth,
    Settings,
    Text,
)

ElevationDeg = Annotated[float, Field(ge=-90.0, le=90.0)]
PowerMw = Annotated[float, Field(gt=0.0, le=1e6)]


class Sector(Settings):
    """A sector of directions: azimuth runs from ``from`` upwards to ``to``."""

    azimuth_from_deg: AngleDeg
    azimuth_to_deg: AngleDeg
    elevation_from_deg: ElevationDeg
    elevation_to_deg: ElevationDeg

    @model_validator(mode="after")
    def _has_an_extent(self) -> Self:
        if not 0.0 < self.azimuth_to_deg - self.azimuth_from_deg <= 360.0:
            raise ValueError(
                "azimuth_to_deg must be above azimuth_from_deg, by at most 360"
            )
        if self.elevation_from_deg >= self.elevation_to_deg:
            raise ValueError("elevation_from_deg must be below elevation_to_deg")
        return self


class Surface(Sector):
    """One thing in a sector of directions, declared as a stop or as a mirror.

    A mirror says into which sector (as seen from the part) it may throw a beam; a
    window that counts as a stop says its optical density at every laser of the bench.
    """

    name: Name
    what: Literal["wall", "screen", "dump", "camera", "window", "post", "hole", "other"]
    acts_as: Literal["stop", "mirror"]
    reflectance: Fraction = 1.0
    throws_into: Sector | None = None
    optical_density: Annotated[float, Field(ge=0.0, le=12.0)] | None = None
    max_power_mw: PowerMw | None = None
    note: Text | None = None

    @model_validator(mode="after")
    def _says_what_it_needs(self) -> Self:
        stop = self.acts_as == "stop"
        if stop and self.throws_into is not None:
            raise ValueError("throws_into belongs to a mirror, not to a stop")
        if stop and self.what == "window" and self.optical_density is None:
            raise ValueError("a window that acts as a stop needs optical_density")
        if self.what != "window" and self.optical_density is not None:
            raise ValueError("optical_density belongs to a window")
        if not stop and self.what == "window":
            raise ValueError("a window lets light through: it cannot act as a mirror")
        return self


class PartMount(Settings):
    """What the beam meets on the stage where the part is missing.

    ``tilt_deg``: how far a bare mirror-like mount may lean from the part's face.
    """

    acts_as: Literal["stop", "mirror"]
    tilt_deg: Annotated[float, Field(ge=0.0, le=45.0)] = 5.0
    note: Text | None = None


class Enclosure(Settings):
    """The enclosure: its class as declared, what power it may hold, its surfaces.

    Surfaces are listed nearest first: a beam meets the first that covers its
    direction. ``margin_deg`` is added around every beam for its width, for a spot away
    from the axis and for angles measured by eye.
    """

    declared_class: Annotated[Literal[1, "none"], NotTruth]
    power_ceiling_mw: PowerMw
    beam_height_mm: Annotated[float, Field(ge=0.0, le=5000.0)]
    margin_deg: Annotated[float, Field(ge=0.0, le=20.0)] = 1.0
    mount: PartMount
    surfaces: Annotated[tuple[Surface, ...], Field(min_length=1, max_length=60)]
    note: Text | None = None

    @model_validator(mode="after")
    def _names_differ(self) -> Self:
        names = [surface.name for surface in self.surfaces]
        if len(set(names)) != len(names):
            raise ValueError("the names of the surfaces must differ from each other")
        return self
