"""What people check, measure and sign before a run: one block an item.

An item applies when every condition it states holds; one without conditions always
applies. Who may answer is a matter of role, and so is who must sign.
"""

from typing import Annotated, Literal, Self

from pydantic import Field, model_validator

from pitchsweep.configs.settings_base import Name, NonNegative, Settings, Text

Role = Literal["safety-officer", "technician", "witness"]
LaserClass = Literal["1", "1M", "2", "2M", "3R", "3B", "4"]
Roles = Annotated[tuple[Role, ...], Field(min_length=1, max_length=3)]


class Applies(Settings):
    """Conditions; those that are stated must all hold.

    ``laser_classes`` the worst estimate among the job's lasers is one of these;
    ``doubled`` a frequency-doubled laser is used; ``unattended`` nobody is there;
    ``enclosed`` the bench file declares a class 1 enclosure; ``simulated`` a twin.
    """

    laser_classes: Annotated[tuple[LaserClass, ...], Field(max_length=7)] | None = None
    doubled: bool | None = None
    unattended: bool | None = None
    enclosed: bool | None = None
    simulated: bool | None = None


class Reading(Settings):
    """A number that somebody reads off; both limits belong to what is allowed.

    ``each_laser`` asks once for every laser of the job, otherwise once. A limit
    ``not_above: laser-power`` is the bench file's power at full drive, on which the
    hazard figures rest; such readings are those made under an attended permit and are
    taken from the ledger. ``with_meter`` asks for the instrument and its due date.
    """

    unit: Literal["mW", "uW", "nm", "mm", "min", "s", "lx"]
    lower: NonNegative = 0.0
    upper: NonNegative | None = None
    not_above: Literal["laser-power"] | None = None
    each_laser: bool = False
    with_meter: bool = False

    @model_validator(mode="after")
    def _limits_fit(self) -> Self:
        if (self.upper is None) == (self.not_above is None):
            raise ValueError("state either upper or not_above, one of them")
        if self.upper is not None and self.lower > self.upper:
            raise ValueError("lower must not be above upper")
        if self.not_above is not None and (self.unit != "mW" or not self.each_laser):
            raise ValueError(
                "not_above: laser-power needs unit: mW and each_laser: true"
            )
        return self


class Item(Settings):
    """One statement to be answered yes.

    ``asks`` words to be written down besides; ``may_be_absent`` allows the answer
    "there is none here"; ``shown_as`` prints the words on the door sheet.
    """

    says: Text
    answered_by: Roles = ("safety-officer", "technician")
    asks: Text | None = None
    may_be_absent: bool = False
    shown_as: (
        Literal["safety-officer", "morning", "eye-injury", "key-holder"] | None
    ) = None
    reading: Reading | None = None
    applies: Applies = Applies()

    @model_validator(mode="after")
    def _shown_words_are_asked(self) -> Self:
        if self.shown_as is not None and self.asks is None:
            raise ValueError("shown_as needs asks: the words that are to be shown")
        return self


class Signature(Settings):
    """A signature that is needed: in one of these roles, where it applies."""

    roles: Roles
    applies: Applies = Applies()


class Checklist(Settings):
    """The items and the policy: who signs, and for how long at most.

    Every signature that applies is given by another person. ``longest_power_age_days``:
    how old the power readings of an unattended run may be.
    """

    checklist: Name
    note: Text | None = None
    longest_window_h: Annotated[float, Field(gt=0.0, le=96.0)] = 24.0
    longest_power_age_days: Annotated[float, Field(gt=0.0, le=366.0)] = 30.0
    signatures: Annotated[tuple[Signature, ...], Field(min_length=1, max_length=4)]
    items: Annotated[dict[Name, Item], Field(min_length=1, max_length=100)]

    @model_validator(mode="after")
    def _somebody_always_signs(self) -> Self:
        if all(rule.applies != Applies() for rule in self.signatures):
            raise ValueError("one of the signatures must apply always")
        return self
