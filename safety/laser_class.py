"""An estimate of a laser's class, with its reason. Pure.

A class estimate is not a classification: that is the manufacturer's, on the label.
"""

from dataclasses import dataclass
from typing import Literal

from pitchsweep.safety.exposure_limits import (
    PHOTOCHEMICAL_TO_NM,
    blink_counts,
    blue_factor,
    worst_wavelength_nm,
)
from pitchsweep.safety.hazard_distances import power_through_mw
from pitchsweep.safety.hazard_records import CHECK, value_of

LaserClass = Literal["1", "2", "3R", "3B", "4"]
NOT_A_CLASSIFICATION = "a class estimate is not a classification"
NO_CLASS_2 = (
    f"; class 2 is not given below {value_of('blink-from'):g} nm, where looking away is"
    " not counted on"
)


@dataclass(frozen=True)
class ClassEstimate:
    """The estimated class, the power through 7 mm behind it, why, and two cautions."""

    laser_class: LaserClass
    pupil_power_mw: float
    reason: str
    cautions: tuple[str, str] = (NOT_A_CLASSIFICATION, CHECK)


def estimate_class(
    wavelength_nm: float,
    power_mw: float,
    beam_mm: float,
    *,
    u_wavelength_nm: float = 0.0,
) -> ClassEstimate:
    """The class of a continuous beam of ``power_mw`` and 1/e2 diameter ``beam_mm``.

    Class 2 rests on looking away, so it is not given below 500 nm. Above class 3R the
    whole power counts, not only what passes 7 mm. Raises OutsideHazardLimits outside
    400-700 nm, u included.
    """
    lowest_nm = worst_wavelength_nm(wavelength_nm, u_wavelength_nm)
    pupil_mw = power_through_mw(power_mw, beam_mm)
    found, reason = _class_and_reason(lowest_nm, pupil_mw, power_mw)
    return ClassEstimate(found, pupil_mw, reason)


def class_1_limit_mw(wavelength_nm: float) -> float:
    """Most power through 7 mm in class 1 for long viewing: the lower of two limits."""
    thermal = value_of("class-1-thermal")
    if wavelength_nm > PHOTOCHEMICAL_TO_NM:
        return thermal
    return min(thermal, value_of("class-1-photochemical") * blue_factor(wavelength_nm))


def _class_and_reason(
    wavelength_nm: float, pupil_mw: float, power_mw: float
) -> tuple[LaserClass, str]:
    first = class_1_limit_mw(wavelength_nm)
    through = f"{pupil_mw:.3g} mW through 7 mm"
    if power_mw > value_of("class-3b"):
        return "4", f"{power_mw:.3g} mW is above {value_of('class-3b'):g} mW"
    if pupil_mw <= first:
        return "1", f"{through} is within {first:.2g} mW for long viewing"
    looks_away = blink_counts(wavelength_nm)
    if looks_away and pupil_mw <= value_of("class-2"):
        return "2", f"{through} is within {value_of('class-2'):g} mW, seen for 0.25 s"
    why = "" if looks_away else NO_CLASS_2
    if pupil_mw <= value_of("class-3r"):
        return "3R", f"{through} is within {value_of('class-3r'):g} mW{why}"
    return "3B", f"{through} is above {value_of('class-3r'):g} mW"
