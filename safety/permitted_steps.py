"""Which stage angles may be lit: values in, a reason or None out. Pure."""

import math
from collections.abc import Mapping
from dataclasses import dataclass

HIGHEST_POWER_MW = 500.0


@dataclass(frozen=True)
class PermittedSteps:
    """The stage angle of every permitted step, and how far off a stage may stand.

    ``angles_deg``     step -> commanded stage angle
    ``tolerance_deg``  largest distance of command and read-back from it
    ``read_age_limit_s``  oldest read-back (also of the power) that still counts
    ``power_ceiling_mw``  highest power at the part
    """

    angles_deg: Mapping[int, float]
    tolerance_deg: float
    read_age_limit_s: float
    power_ceiling_mw: float

    def __post_init__(self) -> None:
        if not 0.0 < self.tolerance_deg <= 5.0:
            raise ValueError(
                f"tolerance_deg = {self.tolerance_deg}: allowed above 0 to 5"
            )
        if not 0.0 < self.read_age_limit_s <= 60.0:
            raise ValueError(
                f"read_age_limit_s = {self.read_age_limit_s}: allowed above 0 to 60"
            )
        if not 0.0 < self.power_ceiling_mw <= HIGHEST_POWER_MW:
            raise ValueError(
                f"power_ceiling_mw = {self.power_ceiling_mw}: allowed above 0 to"
                f" {HIGHEST_POWER_MW:g}"
            )
        for step, angle in self.angles_deg.items():
            if not math.isfinite(angle):
                raise ValueError(f"permitted angle of step {step} is {angle}")


def why_step_is_not_permitted(
    permitted: PermittedSteps, step: int | None
) -> str | None:
    """None for a listed step, otherwise the reason."""
    if step is None:
        return "no step was named"
    if step not in permitted.angles_deg:
        return f"step {step} is not among the {len(permitted.angles_deg)} permitted"
    return None


def why_angle_disagrees(
    permitted: PermittedSteps, step: int, commanded_deg: float, readback_deg: float
) -> str | None:
    """None when command and read-back (degrees) stand at the step's angle.

    NaN disagrees. Angles are stage readings, not folded by whole turns.
    """
    wanted = permitted.angles_deg[step]
    for name, angle in (("commanded", commanded_deg), ("read back", readback_deg)):
        if not abs(angle - wanted) <= permitted.tolerance_deg:
            return (
                f"step {step} belongs at {wanted:.4f} deg, {name} {angle:.4f} deg,"
                f" tolerance {permitted.tolerance_deg:g} deg"
            )
    return None


def why_reading_is_stale(permitted: PermittedSteps, age_s: float) -> str | None:
    """None when the read-back is young enough; negative and NaN ages are not."""
    if 0.0 <= age_s <= permitted.read_age_limit_s:
        return None
    return (
        f"the stage was read {age_s:.3f} s ago, allowed"
        f" {permitted.read_age_limit_s:g} s"
    )


def why_power_is_not_permitted(
    power_mw: float, ceiling_mw: float, age_s: float, age_limit_s: float
) -> str | None:
    """None for a power up to the ceiling that is young enough; NaN is neither."""
    if not 0.0 <= power_mw <= ceiling_mw:
        return f"power at the part {power_mw:g} mW, allowed up to {ceiling_mw:g} mW"
    if not 0.0 <= age_s <= age_limit_s:
        return f"the power was read {age_s:.3f} s ago, allowed {age_limit_s:g} s"
    return None
