"""How much light eye and skin may take, 400-700 nm, continuous. Pure.

The numbers stand in ``hazard_records``. A small source is assumed unless an angle is
given: the image of a laser beam on the retina. The lower of the thermal and the
photochemical limit is the limit, each taken at the worst wavelength within one
standard uncertainty. Check against the standard itself before relying on it.
"""

import math
from dataclasses import dataclass
from typing import Literal

from pitchsweep.safety.hazard_records import value_of
from pitchsweep.safety.safety_errors import OutsideHazardLimits

Rule = Literal["thermal", "photochemical"]

LOWEST_NM, HIGHEST_NM = 400.0, 700.0
SHORTEST_S, LONGEST_S = 18e-6, 3e4
PHOTOCHEMICAL_TO_NM = 600.0
PHOTOCHEMICAL_FROM_S = 10.0
LONG_FROM_S = 10.0
DOSE_TO_S = 100.0
T1_TO_NM = 500.0
SMALL_SOURCE_MRAD = value_of("alpha-min")
BLINK_S = 0.25
LONG_LOOK_S = 100.0
UNATTENDED_S = 3e4
TIMES_S = (BLINK_S, 10.0, LONG_LOOK_S, UNATTENDED_S)
"""The exposures for which figures are given; an unattended night takes the last."""


@dataclass(frozen=True)
class EyeLimit:
    """The eye's limit over a 7 mm pupil: mean irradiance during ``exposure_s``.

    ``photochemical_w_m2`` is None where no such limit applies; ``rule`` names the
    lower of the two, which is ``irradiance_w_m2``.
    """

    wavelength_nm: float
    exposure_s: float
    source_mrad: float
    thermal_w_m2: float
    photochemical_w_m2: float | None

    @property
    def rule(self) -> Rule:
        """Which of the two limits is the lower."""
        blue = self.photochemical_w_m2
        lower = blue is not None and blue < self.thermal_w_m2
        return "photochemical" if lower else "thermal"

    @property
    def irradiance_w_m2(self) -> float:
        """The lower limit."""
        blue = self.photochemical_w_m2
        return self.thermal_w_m2 if blue is None else min(self.thermal_w_m2, blue)

    @property
    def dose_j_m2(self) -> float:
        """The lower limit times the exposure."""
        return self.irradiance_w_m2 * self.exposure_s

    @property
    def pupil_power_mw(self) -> float:
        """The lower limit as power through the pupil."""
        return self.irradiance_w_m2 * pupil_area_m2() * 1e3


def eye_limit(
    wavelength_nm: float,
    exposure_s: float,
    *,
    u_wavelength_nm: float = 0.0,
    source_mrad: float = SMALL_SOURCE_MRAD,
) -> EyeLimit:
    """The eye's limit for one exposure to continuous light.

    ``source_mrad``: angle under which the source is seen, a small source if not given;
    a larger one raises the thermal limit only. Raises OutsideHazardLimits for a
    wavelength outside 400-700 nm or within its u of the ends, times outside 18 us to
    30 000 s, angles outside 1.5 to 100 mrad (or above 1.5 mrad before 0.25 s).
    """
    lowest_nm = worst_wavelength_nm(wavelength_nm, u_wavelength_nm)
    _check_time(exposure_s)
    _check_source(source_mrad, exposure_s)
    return EyeLimit(
        wavelength_nm=wavelength_nm,
        exposure_s=exposure_s,
        source_mrad=source_mrad,
        thermal_w_m2=_thermal_w_m2(exposure_s, source_mrad),
        photochemical_w_m2=_photochemical_w_m2(lowest_nm, exposure_s),
    )


def skin_limit_w_m2(
    wavelength_nm: float, exposure_s: float, *, u_wavelength_nm: float = 0.0
) -> float:
    """The skin's limit as mean irradiance; level M below 10 s. Raises as eye_limit.

    The published numbers meet at 10 s to 2 %.
    """
    worst_wavelength_nm(wavelength_nm, u_wavelength_nm)
    _check_time(exposure_s)
    if exposure_s >= LONG_FROM_S:
        return value_of("skin-irradiance")
    return float(value_of("skin-dose") * exposure_s**-0.75)


def worst_wavelength_nm(wavelength_nm: float, u_wavelength_nm: float = 0.0) -> float:
    """The wavelength within u at which the limits are lowest: the shortest.

    Raises OutsideHazardLimits when the wavelength plus or minus u leaves 400-700 nm.
    """
    low_nm, high_nm = wavelength_nm - u_wavelength_nm, wavelength_nm + u_wavelength_nm
    if not (u_wavelength_nm >= 0.0 and low_nm >= LOWEST_NM and high_nm <= HIGHEST_NM):
        raise OutsideHazardLimits(
            "wavelength",
            f"{wavelength_nm:g} nm with u = {u_wavelength_nm:g} nm",
            f"{LOWEST_NM:g} to {HIGHEST_NM:g} nm, u included",
        )
    return low_nm


def blue_factor(wavelength_nm: float) -> float:
    """C_B: 1 up to 450 nm, 10^(0.02 (lambda - 450)) beyond."""
    beyond_nm = max(0.0, wavelength_nm - value_of("blue-from"))
    return float(10.0 ** (value_of("blue-slope") * beyond_nm))


def t1_s(wavelength_nm: float) -> float:
    """T1: from when the photochemical limit is the lower; 10 s rising to 100 s."""
    return value_of("t1-start") * blue_factor(min(wavelength_nm, T1_TO_NM))


def t2_s(source_mrad: float) -> float:
    """T2: from when the thermal limit of a larger source stays; 10 s to 100 s."""
    least, most = value_of("alpha-min"), value_of("alpha-max")
    within = (min(max(source_mrad, least), most) - least) / (most - least)
    return float(value_of("t2-start") * 10.0**within)


def size_factor(source_mrad: float) -> float:
    """C_E: 1 for a small source, its angle over 1.5 mrad up to 100 mrad."""
    least, most = value_of("alpha-min"), value_of("alpha-max")
    return min(max(source_mrad, least), most) / least


def pupil_area_m2() -> float:
    """The area of the 7 mm pupil, 3.848e-5 m2."""
    return math.pi / 4.0 * (value_of("pupil") * 1e-3) ** 2


def blink_counts(wavelength_nm: float, u_wavelength_nm: float = 0.0) -> bool:
    """Whether looking away within 0.25 s is counted on. Never at 405 nm."""
    return worst_wavelength_nm(wavelength_nm, u_wavelength_nm) >= value_of("blink-from")


def _thermal_w_m2(exposure_s: float, source_mrad: float) -> float:
    if exposure_s < LONG_FROM_S:
        factor = value_of("thermal-dose") * size_factor(source_mrad)
        return float(factor * exposure_s**-0.25)
    if source_mrad <= SMALL_SOURCE_MRAD:
        return value_of("thermal-irradiance")
    until_s = min(exposure_s, t2_s(source_mrad))
    factor = value_of("thermal-extended") * size_factor(source_mrad)
    return float(factor * until_s**-0.25)


def _photochemical_w_m2(wavelength_nm: float, exposure_s: float) -> float | None:
    if exposure_s < PHOTOCHEMICAL_FROM_S or wavelength_nm > PHOTOCHEMICAL_TO_NM:
        return None
    factor = blue_factor(wavelength_nm)
    if exposure_s <= DOSE_TO_S:
        return value_of("photochemical-dose") * factor / exposure_s
    return value_of("photochemical-irradiance") * factor


def _check_time(exposure_s: float) -> None:
    if not SHORTEST_S <= exposure_s <= LONGEST_S:
        raise OutsideHazardLimits(
            "exposure", f"{exposure_s:g} s", f"{SHORTEST_S:g} to {LONGEST_S:g} s"
        )


def _check_source(source_mrad: float, exposure_s: float) -> None:
    most = value_of("alpha-max") if exposure_s >= BLINK_S else SMALL_SOURCE_MRAD
    if not SMALL_SOURCE_MRAD <= source_mrad <= most:
        raise OutsideHazardLimits(
            "source angle",
            f"{source_mrad:g} mrad for {exposure_s:g} s",
            f"{SMALL_SOURCE_MRAD:g} to {most:g} mrad",
        )
