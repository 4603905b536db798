"""What is measured: identity, nominal pitch, tolerance, material, how it may sit."""

from typing import Annotated, Literal, Self

from pydantic import Field, model_validator

from pitchsweep.configs.moments import Day
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
    certificate_due: Day | None = None


class Material(Settings):
    """Linear expansion of what carries the grooves, and its temperature."""

    name: Name
    expansion_per_K: Annotated[float, Field(ge=-1e-5, le=5e-4)]
    u_expansion_per_K: Annotated[float, Field(ge=0.0, le=5e-4)]
    temperature_C: Annotated[float, Field(ge=0.0, le=60.0)] = 20.0
    u_temperature_C: Annotated[float, Field(gt=0.0, le=20.0)] = 0.5


class Part(Settings):
    """A part with grooves: one serial, one lot, one side, one place.

    A disc says ``grooves: spiral``, the radius of the track where the beam meets it,
    and ``read_side``: whether light meets the grooves bare or through the clear cover
    that ``cover_mm``, ``cover_index`` and ``u_cover_wedge_mrad`` describe (the wedge is
    how far its faces may be from even). ``clear_width_mm`` is how wide the grooved
    surface is across the grooves, centred on the stage axis: spots of a beam that
    overruns it are not used.
    """

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
    grooves: Literal["straight", "spiral"] = "straight"
    track_radius_mm: Annotated[float, Field(ge=1.0, le=1000.0)] | None = None
    u_track_radius_mm: Annotated[float, Field(gt=0.0, le=100.0)] = 1.0
    read_side: Literal["bare", "through-cover"] | None = None
    cover_index: Annotated[float, Field(ge=1.2, le=2.5)] = 1.55
    u_cover_index: Annotated[float, Field(gt=0.0, le=0.5)] = 0.03
    u_cover_wedge_mrad: Annotated[float, Field(gt=0.0, le=20.0)] = 1.0
    clear_width_mm: Annotated[float, Field(ge=0.1, le=1000.0)] | None = None

    @model_validator(mode="after")
    def _a_disc_says_how_it_is_read(self) -> Self:
        if self.grooves == "spiral" and self.read_side is None:
            raise ValueError(
                "a part with 'grooves: spiral' is a disc and must say its 'read_side':"
                " bare, or through-cover with cover_mm"
            )
        if self.grooves == "spiral" and self.track_radius_mm is None:
            raise ValueError(
                "a part with 'grooves: spiral' needs 'track_radius_mm', the radius of"
                " the track where the beam meets it"
            )
        if self.grooves == "straight" and self.track_radius_mm is not None:
            raise ValueError("'track_radius_mm' goes with 'grooves: spiral' only")
        return self

    @model_validator(mode="after")
    def _the_cover_is_where_it_is_read(self) -> Self:
        if self.read_side == "through-cover" and self.cover_mm == 0.0:
            raise ValueError("'read_side: through-cover' needs cover_mm above 0")
        if self.read_side == "bare" and self.cover_mm > 0.0:
            raise ValueError(
                "'read_side: bare' and a cover_mm above 0 exclude each other"
            )
        return self
