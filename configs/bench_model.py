"""What stands on the table: screen, beam, stage, camera, lasers, air, emission line.

Every quantity's key carries its unit; ``u_`` keys are standard uncertainties. The
nominal values and their uncertainties are the priors of the joint fit.
"""

from typing import Annotated, Literal, Self

from pydantic import Field, field_validator, model_validator

from pitchsweep.configs.enclosure_model import Enclosure
from pitchsweep.configs.moments import Day
from pitchsweep.configs.ports_model import CameraPort, Ports, SerialPort, StagePort
from pitchsweep.configs.sensor_model import AirSensor, PowerSensor
from pitchsweep.configs.settings_base import (
    AngleDeg,
    Fraction,
    Name,
    NonNegative,
    NotTruth,
    Positive,
    Settings,
    Text,
)
from pitchsweep.configs.twin_model import TwinSettings


class Hole(Settings):
    """The hole in the screen through which the beam comes; spots on it are unused."""

    x_mm: Annotated[float, Field(ge=-500.0, le=500.0)] = 0.0
    y_mm: Annotated[float, Field(ge=-500.0, le=500.0)] = 0.0
    diameter_mm: Annotated[float, Field(gt=0.0, le=100.0)] = 8.0


_PlaceMm = Annotated[float, Field(ge=-5000.0, le=5000.0)]
MarkMm = tuple[_PlaceMm, _PlaceMm]
"""Roughly where a mark on the screen frame is seen: x and y by the nominal map."""


class Screen(Settings):
    """A flat screen facing the part; x, y in mm from where nominal +z meets it.

    ``kind: camera-at-infinity`` stands for a camera that looks at the part itself,
    focused at infinity: ``distance_mm`` is then its focal length, ``width_mm`` and
    ``height_mm`` the size of its sensor, x and y places on it (focal length times the
    tangent of the direction), the tilts those of its axis, and the hole what hides the
    middle. ``u_lens_distortion_mm`` is by how much the lens may shift half the width.
    ``marks_mm`` are bright fixed marks that every frame shows; they tell the camera's
    shift and scale at each step.
    """

    kind: Literal["flat-screen", "camera-at-infinity"] = "flat-screen"
    distance_mm: Annotated[float, Field(ge=5.0, le=5000.0)]
    u_distance_mm: Annotated[float, Field(gt=0.0, le=200.0)] = 5.0
    u_tilt_mrad: Annotated[float, Field(gt=0.0, le=200.0)] = 30.0
    u_offset_mm: Annotated[float, Field(gt=0.0, le=50.0)] = 3.0
    width_mm: Annotated[float, Field(ge=2.0, le=5000.0)]
    height_mm: Annotated[float, Field(ge=2.0, le=5000.0)]
    u_map_mm: Annotated[float, Field(gt=0.0, le=20.0)] = 0.5
    u_lens_distortion_mm: Annotated[float, Field(gt=0.0, le=20.0)] | None = None
    hole: Hole = Hole()
    marks_mm: Annotated[tuple[MarkMm, ...], Field(max_length=16)] = ()


class Beam(Settings):
    """The beam where it meets the part, and how well its line is known."""

    diameter_mm: Annotated[float, Field(gt=0.0, le=20.0)] = 1.0
    u_diameter_mm: Annotated[float, Field(gt=0.0, le=20.0)] = 0.2
    u_elevation_mrad: Annotated[float, Field(gt=0.0, le=100.0)] = 5.0
    u_offset_mm: Annotated[float, Field(gt=0.0, le=10.0)] = 0.5
    u_height_mm: Annotated[float, Field(gt=0.0, le=20.0)] = 1.0


class Stage(Settings):
    """The rotation stage: sense, travel, and what is known of its errors.

    ``u_backlash_arcsec``: what may be left of its backlash, though every angle is
    approached from below, between places come to from below and from above.
    """

    direction: Annotated[Literal[1, -1], NotTruth] = 1
    travel_min_deg: AngleDeg = -180.0
    travel_max_deg: AngleDeg = 180.0
    speed_deg_per_s: Annotated[float, Field(gt=0.0, le=720.0)] = 10.0
    settle_s: Annotated[float, Field(ge=0.0, le=600.0)] = 0.25
    approach_deg: Annotated[float, Field(ge=0.0, le=30.0)] = 0.5
    angle_tolerance_deg: Annotated[float, Field(gt=0.0, le=5.0)] = 0.01
    u_zero_deg: Annotated[float, Field(gt=0.0, le=20.0)] = 0.5
    closure_recorded_on: Text | None = None
    u_scale_ppm: Annotated[float, Field(gt=0.0, le=10000.0)] = 1000.0
    worm_per_turn: Annotated[int, Field(ge=5, le=1000)] | None = None
    u_worm_arcsec: Annotated[float, Field(gt=0.0, le=3600.0)] = 5.0
    u_repeatability_arcsec: Annotated[float, Field(gt=0.0, le=3600.0)] = 5.0
    u_backlash_arcsec: Annotated[float, Field(gt=0.0, le=3600.0)] = 5.0
    u_harmonics_arcsec: tuple[Positive, Positive, Positive, Positive] = (
        60.0,
        20.0,
        10.0,
        10.0,
    )

    @model_validator(mode="after")
    def _travel_has_a_length(self) -> Self:
        if self.travel_min_deg >= self.travel_max_deg:
            raise ValueError("travel_min_deg must be below travel_max_deg")
        return self


class Drift(Settings):
    """What wanders during a run: standard uncertainty over its whole length."""

    u_camera_shift_um: Annotated[float, Field(gt=0.0, le=10000.0)] = 50.0
    u_camera_scale_ppm: Annotated[float, Field(gt=0.0, le=10000.0)] = 50.0
    u_pointing_urad: Annotated[float, Field(gt=0.0, le=10000.0)] = 50.0


class Camera(Settings):
    """The camera and its nominal pixel-to-millimetre map (one scale, a centre).

    A pixel (column, row) lies on the screen at
    x = mm_per_px * (column - centre_column_px), y = -mm_per_px * (row - centre_row_px).
    """

    width_px: Annotated[int, Field(ge=64, le=20000)]
    height_px: Annotated[int, Field(ge=64, le=20000)]
    bits: Literal[8, 10, 12, 16] = 12
    mm_per_px: Annotated[float, Field(gt=0.0, le=10.0)]
    centre_column_px: Annotated[float, Field(ge=-20000.0, le=40000.0)]
    centre_row_px: Annotated[float, Field(ge=-20000.0, le=40000.0)]
    gain_dn_per_e: Annotated[float, Field(gt=0.0, le=1000.0)] = 0.4
    read_noise_e: Annotated[float, Field(ge=0.0, le=10000.0)] = 4.0
    black_level_dn: Annotated[float, Field(ge=0.0, le=10000.0)] = 64.0
    readout_s: Annotated[float, Field(ge=0.0, le=60.0)] = 0.03


class InfraredFilter(Settings):
    """What keeps a doubled laser's infrared in, and what was measured behind it."""

    description: Text
    residual_mw: Annotated[float, Field(ge=0.0, le=1000.0)]
    measured_on: Day


class Laser(Settings):
    """One laser: vacuum wavelength with its standard uncertainty, power at the part.

    ``u_jump_pm``: size of a mode hop, should the spots show one; ``may_jump`` also
    counts hops too small for them to show. ``wavelength_due``: when it is to be
    calibrated again.
    ``full_drive_mw`` is what reaches the part at full drive with every attenuator out
    (``power_mw`` where it is not given); ``divergence_mrad`` the full 1/e2 angle (the
    smallest that diffraction allows where it is not given).
    """

    vacuum_wavelength_nm: Annotated[float, Field(ge=400.0, le=700.0)]
    u_wavelength_nm: Annotated[float, Field(gt=0.0, le=20.0)]
    u_drift_pm: Annotated[float, Field(gt=0.0, le=1000.0)] = 0.5
    u_jump_pm: Annotated[float, Field(gt=0.0, le=5000.0)] = 300.0
    may_jump: bool = False
    wavelength_due: Day | None = None
    power_mw: Annotated[float, Field(gt=0.0, le=500.0)]
    full_drive_mw: Annotated[float, Field(gt=0.0, le=1e5)] | None = None
    divergence_mrad: Annotated[float, Field(gt=0.0, le=500.0)] | None = None
    frequency_doubled: bool = False
    infrared_filter: InfraredFilter | None = None

    @model_validator(mode="after")
    def _full_drive_is_the_most(self) -> Self:
        if self.full_drive_mw is not None and self.full_drive_mw < self.power_mw:
            raise ValueError("full_drive_mw must not be below power_mw")
        return self


class Air(Settings):
    """The air in the enclosure where no sensor reads it."""

    temperature_C: Annotated[float, Field(ge=0.0, le=50.0)] = 20.0
    u_temperature_C: Annotated[float, Field(gt=0.0, le=20.0)] = 0.5
    pressure_hPa: Annotated[float, Field(ge=600.0, le=1200.0)] = 1013.25
    u_pressure_hPa: Annotated[float, Field(gt=0.0, le=200.0)] = 5.0
    humidity_percent: Annotated[float, Field(ge=0.0, le=100.0)] = 50.0
    u_humidity_percent: Annotated[float, Field(gt=0.0, le=50.0)] = 10.0
    co2_ppm: Annotated[float, Field(ge=0.0, le=2000.0)] = 450.0


LINES = ("keep-alive", "pulses")


class Emission(Settings):
    """The unit that switches light. A static control line is refused by design.

    ``keep-alive``: a unit that is spoken to and drops out by itself. ``pulses``: a
    time-out relay fed over a modem control line, which closes after several pulses.
    ``lasers_at_once``: whether a selector or the wiring lets one laser at a time
    through (``one``), or all of the bench may be alight behind the unit together
    (``all``): the unit has one line and cannot tell which of them are. With
    ``switches: laser`` a laser starts cold at every step: ``u_switched_nm`` is the
    standard uncertainty that this adds to its wavelength.
    """

    line: Literal["keep-alive", "pulses"] = "keep-alive"
    switches: Literal["head-shutter", "laser"] = "head-shutter"
    keep_alive_ms: Annotated[int, Field(ge=50, le=250)] = 200
    unit_identity: Name = "bench-unit-1"
    lasers_at_once: Literal["one", "all"] = "all"
    u_switched_nm: Annotated[float, Field(gt=0.0, le=20.0)] = 0.3
    interlock_channels: Annotated[Literal[1, 2], NotTruth] = 1

    @field_validator("line", mode="before")
    @classmethod
    def _never_a_static_level(cls, value: object) -> object:
        if value in LINES:
            return value
        raise ValueError(
            f"'{value}' may not hold light: a static level stays up when a program"
            " hangs, and RTS and DTR rise when a port is merely opened; allowed "
            + " or ".join(LINES)
        )


class Bench(Settings):
    """A bench: either a twin or ports, never both."""

    bench: Name
    note: Text | None = None
    screen: Screen
    beam: Beam = Beam()
    stage: Stage = Stage()
    camera: Camera
    lasers: Annotated[dict[Name, Laser], Field(min_length=1, max_length=8)]
    air: Air = Air()
    air_sensor: AirSensor | None = None
    power_sensor: PowerSensor | None = None
    drift: Drift = Drift()
    emission: Emission = Emission()
    enclosure: Enclosure | None = None
    reading_u_mm: Annotated[float, Field(gt=0.0, le=20.0)] = 0.1
    twin: TwinSettings | None = None
    ports: Ports | None = None

    @model_validator(mode="after")
    def _twin_or_ports(self) -> Self:
        if (self.twin is None) == (self.ports is None):
            raise ValueError("a bench has either 'twin:' or 'ports:', exactly one")
        return self

    @model_validator(mode="after")
    def _ports_fit_what_they_serve(self) -> Self:
        if self.ports is None:
            return self
        for name, sensor, port in (
            ("air", self.air_sensor, self.ports.air),
            ("power", self.power_sensor, self.ports.power),
        ):
            if (sensor is None) != (port is None):
                raise ValueError(
                    f"{name}_sensor and ports.{name} go together: give both or none"
                )
        camera, bits = self.ports.camera, self.camera.bits
        eight = camera.by == "network-video" or (
            camera.by == "usb-video" and camera.pixel_format != "Y16"
        )
        if eight and bits != 8:
            raise ValueError(
                f"camera.bits is {bits}, and {camera.by} of this format gives 8"
            )
        return self


__all__ = [
    "Air",
    "Beam",
    "Bench",
    "Camera",
    "CameraPort",
    "Emission",
    "Enclosure",
    "Fraction",
    "Hole",
    "InfraredFilter",
    "Laser",
    "NonNegative",
    "Ports",
    "Screen",
    "SerialPort",
    "Stage",
    "StagePort",
]
