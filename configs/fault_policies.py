"""What is to happen at each fault that a sweep can meet: declared in the recipe."""

from typing import Annotated, Literal

from pydantic import Field

from pitchsweep.configs.settings_base import Settings

Policy = Literal["retry", "re-home", "skip", "pause", "stop", "note"]
LastPolicy = Literal["skip", "pause", "stop"]


class FaultPolicies(Settings):
    """One policy a fault. Whatever it is, the bench is dark before it is carried out.

    ``retry`` takes the step again, ``re-home`` searches the zero in the dark and takes
    it again, each ``retries`` times at most, then ``then`` holds; ``skip`` leaves the
    step out, ``pause`` waits for a person, ``stop`` ends the sweep so that it can be
    resumed, ``note`` goes on and says so. A jump of a laser's wavelength is carried by
    the fit whatever is done; ``skip`` leaves out every step since it was.
    """

    retries: Annotated[int, Field(ge=0, le=20)] = 2
    then: LastPolicy = "stop"
    stage_no_answer: Policy = "retry"
    stage_nonsense: Policy = "retry"
    stage_refused: Policy = "retry"
    stage_stalled: Policy = "re-home"
    stage_wrong_place: Policy = "re-home"
    stage_zero_lost: Policy = "re-home"
    camera_no_frame: Policy = "retry"
    camera_stale: Policy = "retry"
    camera_identical: Policy = "retry"
    camera_wrong_frame: Policy = "retry"
    camera_black: Policy = "retry"
    camera_white: Policy = "retry"
    camera_gone: Policy = "retry"
    laser_power: Policy = "note"
    laser_dropout: Policy = "retry"
    laser_feedback: Policy = "skip"
    laser_jump: Policy = "note"
    air_missing: Policy = "note"
    disk_low: Policy = "stop"
    spots_vanished: Policy = "retry"
    spots_appeared: Policy = "note"


FAULT_KINDS = tuple(
    name for name in FaultPolicies.model_fields if name not in ("retries", "then")
)
"""Every fault that has a policy, named as its key."""
