"""Faults that a simulated bench can be told to have, each at its n-th occasion."""

from typing import Annotated, Literal, Self

from pydantic import Field, model_validator

from pitchsweep.configs.settings_base import Settings

ACTIONS_AT: dict[str, tuple[str, ...]] = {
    "stage-ask": ("silent", "garbage", "late", "declined"),
    "stage-move": ("stall", "wrong-place", "zero-lost"),
    "unit-ask": ("silent", "garbage", "late"),
    "unit-keep": (
        "silent",
        "light-stuck",
        "shutter-stuck",
        "door-opens",
        "one-channel-opens",
    ),
    "exposure": (
        "refused",
        "no-frame",
        "stale",
        "identical",
        "wrong-size",
        "wrong-depth",
        "black",
        "white",
        "gone",
    ),
    "light": (
        "dropout",
        "power-drop",
        "power-rise",
        "mode-hop",
        "blocked",
        "stray-spot",
    ),
    "sensors": ("missing",),
}
"""Occasion -> what can go wrong then. "light" is counted at every look at the screen
while the light is on; "power-drop", "power-rise" and "mode-hop" last from then on."""

Occasion = Literal[
    "stage-ask", "stage-move", "unit-ask", "unit-keep", "exposure", "light", "sensors"
]


class TwinFault(Settings):
    """At occasions ``nth`` to ``nth + times - 1`` (from 1) of ``at``: ``does``.

    ``late_s`` is how late a late answer comes, on the real clock.
    """

    at: Occasion
    nth: Annotated[int, Field(ge=1, le=10**9)]
    does: Annotated[str, Field(min_length=1, max_length=40)]
    times: Annotated[int, Field(ge=1, le=10**9)] = 1
    late_s: Annotated[float, Field(ge=0.0, le=60.0)] = 0.5

    @model_validator(mode="after")
    def _known_there(self) -> Self:
        if self.does not in ACTIONS_AT[self.at]:
            known = ", ".join(ACTIONS_AT[self.at])
            raise ValueError(f"at '{self.at}' the twin can do {known}")
        return self
