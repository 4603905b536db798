"""Sensors that a bench has beside its camera, and when each is due to be calibrated."""

from typing import Annotated

from pydantic import Field

from pitchsweep.configs.moments import Day
from pitchsweep.configs.settings_base import Settings, Text


class AirSensor(Settings):
    """Sensors beside the part: standard uncertainties, and when they are due again."""

    name: Text
    u_temperature_C: Annotated[float, Field(gt=0.0, le=20.0)] = 0.1
    u_pressure_hPa: Annotated[float, Field(gt=0.0, le=200.0)] = 0.5
    u_humidity_percent: Annotated[float, Field(gt=0.0, le=50.0)] = 3.0
    u_part_temperature_C: Annotated[float, Field(gt=0.0, le=20.0)] = 0.1
    calibration_due: Day | None = None


class PowerSensor(Settings):
    """A power sensor in the beam path."""

    name: Text
    u_relative: Annotated[float, Field(gt=0.0, le=0.5)] = 0.02
    calibration_due: Day | None = None
