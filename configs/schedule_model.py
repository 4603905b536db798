"""When a job runs, when it ends, and who is told: the ``schedule`` of a job."""

from typing import Annotated

from pydantic import Field

from pitchsweep.configs.moments import UtcMoment
from pitchsweep.configs.settings_base import Settings, Text


class Schedule(Settings):
    """The frame of a night; everything is optional, all times are UTC.

    ``steady_K_per_h``: the sweep begins when the part's temperature changes by less,
    and at the latest after ``steady_within_min``. ``enough_relative_u``: it ends when
    the relative standard uncertainty of the pitch is down to this. ``tell`` is a
    command (and its words) that gets a JSON message on its standard input when the
    sweep finishes, trips, pauses, stops or meets a fault.
    """

    not_before: UtcMoment | None = None
    stop_by: UtcMoment | None = None
    steady_K_per_h: Annotated[float, Field(gt=0.0, le=10.0)] | None = None
    steady_within_min: Annotated[float, Field(gt=0.0, le=1440.0)] = 120.0
    enough_relative_u: Annotated[float, Field(gt=0.0, le=0.1)] | None = None
    tell: Annotated[tuple[Text, ...], Field(max_length=32)] = ()
    tell_within_s: Annotated[float, Field(gt=0.0, le=600.0)] = 30.0
