"""Irradiance, hazard distances and optical density of a beam. Pure formulas.

Diameters and divergences of a Gaussian beam are 1/e2 values (full); the distance
formulas want 1/e values, smaller by the square root of two. Sources: secondary copies
of ANSI Z136.1 Appendix B and IEC TR 60825-14; the power in an aperture is remembered,
not seen. Check against the standard itself before relying on it.
"""

import math

from pitchsweep.safety.exposure_limits import pupil_area_m2
from pitchsweep.safety.hazard_records import value_of

MM2_PER_M2 = 1e6


def power_through_mw(
    power_mw: float, beam_mm: float, aperture_mm: float | None = None
) -> float:
    """Power of a Gaussian beam through a centred aperture, 7 mm if not given.

    P (1 - exp(-2 D^2/d^2)) with ``beam_mm`` = d, the 1/e2 diameter.
    """
    aperture = value_of("pupil") if aperture_mm is None else aperture_mm
    return power_mw * -math.expm1(-2.0 * (aperture / beam_mm) ** 2)


def pupil_irradiance_w_m2(power_mw: float, beam_mm: float) -> float:
    """Irradiance averaged over the 7 mm pupil: what an eye limit is compared with."""
    return power_through_mw(power_mw, beam_mm) * 1e-3 / pupil_area_m2()


def disc_irradiance_w_m2(power_mw: float, disc_mm: float) -> float:
    """Irradiance of a beam spread evenly over a disc of diameter ``disc_mm``."""
    return power_mw * 1e-3 * MM2_PER_M2 / (math.pi / 4.0 * disc_mm**2)


def diffraction_limit_mrad(wavelength_nm: float, beam_mm: float) -> float:
    """The smallest full 1/e2 divergence of a Gaussian beam, 4 lambda/(pi d)."""
    return 4.0 * wavelength_nm * 1e-6 / (math.pi * beam_mm) * 1e3


def one_over_e(one_over_e2: float) -> float:
    """A 1/e diameter or divergence from its 1/e2 value."""
    return one_over_e2 / math.sqrt(2.0)


def direct_distance_m(
    power_mw: float, limit_w_m2: float, *, divergence_mrad: float, beam_mm: float
) -> float:
    """Along the beam: (1/phi) (sqrt(4 P/(pi E)) - a), 0 where the beam is below E.

    ``divergence_mrad`` phi and ``beam_mm`` a are 1/e values.
    """
    spread_m = _safe_diameter_m(power_mw, limit_w_m2) - beam_mm * 1e-3
    return max(0.0, spread_m / (divergence_mrad * 1e-3))


def lens_distance_m(
    power_mw: float, limit_w_m2: float, *, focal_mm: float, beam_mm: float
) -> float:
    """Behind a lens: (f/b) sqrt(4 P/(pi E)), b the 1/e beam diameter on the lens."""
    return focal_mm / beam_mm * _safe_diameter_m(power_mw, limit_w_m2)


def diffuse_distance_m(
    power_mw: float,
    limit_w_m2: float,
    *,
    reflectance: float = 1.0,
    off_normal_deg: float = 0.0,
) -> float:
    """From a matt surface: sqrt(rho P cos(theta)/(pi E))."""
    thrown_w = reflectance * power_mw * 1e-3 * math.cos(math.radians(off_normal_deg))
    return math.sqrt(max(0.0, thrown_w) / (math.pi * limit_w_m2))


def optical_density(irradiance_w_m2: float, limit_w_m2: float) -> float:
    """log10(H0/E), 0 where nothing is needed."""
    return max(0.0, math.log10(irradiance_w_m2 / limit_w_m2))


def _safe_diameter_m(power_mw: float, limit_w_m2: float) -> float:
    return math.sqrt(4.0 * power_mw * 1e-3 / (math.pi * limit_w_m2))
