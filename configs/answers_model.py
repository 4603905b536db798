"""What people answered: the same whether typed at a terminal or read from a file."""

from typing import Annotated

from pydantic import Field

from pitchsweep.configs.checklist_model import Role
from pitchsweep.configs.moments import Day
from pitchsweep.configs.settings_base import Name, NonNegative, Settings, Text

UtcText = Annotated[
    str, Field(pattern=r"^[0-9]{4}-[0-9]{2}-[0-9]{2}T[0-9]{2}:[0-9]{2}(:[0-9]{2})?Z$")
]


class ReadingAnswer(Settings):
    """A number read off, in the checklist's unit; ``of`` names the laser, if any."""

    of: Name | None = None
    value: NonNegative
    meter: Text | None = None
    meter_due: Day | None = None


class ItemAnswer(Settings):
    """``by`` a signer (default: the first who may); ``absent``: there is none here."""

    by: Name | None = None
    yes: bool = True
    absent: bool = False
    words: Text | None = None
    readings: Annotated[tuple[ReadingAnswer, ...], Field(max_length=16)] = ()


class SignsAs(Settings):
    """A person who signs, and in which role."""

    name: Name
    role: Role


class Answers(Settings):
    """A whole interview; the window begins now when ``valid_from`` is not given."""

    signers: Annotated[tuple[SignsAs, ...], Field(min_length=1, max_length=4)]
    valid_from: UtcText | None = None
    valid_for_h: Annotated[float, Field(gt=0.0, le=96.0)] = 14.0
    items: Annotated[dict[Name, ItemAnswer], Field(max_length=100)]
