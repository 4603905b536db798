"""What is measured: identity, nominal pitch, tolerance, material, how it may sit."""

from typing import Annotated, Self

from pydantic import Field, model_validator

from pitchsweep.configs.settings_base import Name, Positive, Settings, Text

PitchNm = Annotated[float, Field(ge=100.0, le=100000.0)]


class Tolerance(Settings):
    """The limits of the pitch at the reference temperature."""

    lower_nm: PitchNm
    upper_nm: PitchNm

    @model_validator(mode="after")
    def _lower_is_below_upper(self) -> Self:
        if self.lower_nm >= self.upper_nm:
            raise ValueError("lower_nm must be below upper_nm")
        return self


class Certified(Settings):
    """A certified pitch: makes the part a reference."""

    pitch_nm: PitchNm
    u_pitch_nm: Positive
    certificate: Text


class Material(Settings):
    """Linear expansion of what carries the grooves, and its temperature."""

    name: Name
    expansion_per_K: Annotated[float, Field(ge=-1e-5, le=5e-4)]
    u_expansion_per_K: Annotated[float, Field(ge=0.0, le=5e-4)]
    temperature_C: Annotated[float, Field(ge=0.0, le=60.0)] = 20.0
    u_temperature_C: Annotated[float, Field(gt=0.0, le=20.0)] = 0.5


class Part(Settings):
    """A part with grooves: one serial, one lot, one side, one place."""

    part: Name
    serial: Text
    lot: Text
    side: Text
    place: Text
    note: Text | None = None
    nominal_pitch_nm: PitchNm
    nominal_within_percent: Annotated[float, Field(gt=0.0, le=20.0)] = 1.5
    tolerance: Tolerance | None = None
    certified: Certified | None = None
    material: Material
    u_tilt_mrad: Annotated[float, Field(gt=0.0, le=200.0)] = 10.0
    u_groove_azimuth_mrad: Annotated[float, Field(gt=0.0, le=200.0)] = 10.0
    u_curvature_per_m: Annotated[float, Field(gt=0.0, le=100.0)] = 0.1
    cover_mm: Annotated[float, Field(ge=0.0, le=10.0)] = 0.0
    u_cover_mm: Annotated[float, Field(gt=0.0, le=10.0)] = 0.3
    u_surface_offset_mm: Annotated[float, Field(gt=0.0, le=20.0)] = 0.3
