"""Refractive index of the twin's air, modified Edlén equation.

Written from the coefficients published with the NIST Engineering Metrology Toolbox
(J. A. Stone and J. H. Zimmerman, "Index of refraction of air"), for 450 ppm of carbon
dioxide. Own formulation: the fit has another one, and the two check each other.
"""

import numpy as np

_PSV_K = (
    1.16705214528e3,
    -7.24213167032e5,
    -1.70738469401e1,
    1.20208247025e4,
    -3.23255503223e6,
    1.49151086135e1,
    -4.82326573616e3,
    4.05113405421e5,
    -2.38555575678e-1,
    6.50175348448e2,
)


def saturation_pressure_pa(temperature_c: float) -> float:
    """Saturation vapour pressure over water in Pa (IAPWS-IF97, region 4)."""
    k = _PSV_K
    kelvin = temperature_c + 273.15
    omega = kelvin + k[8] / (kelvin - k[9])
    quadratic = (
        omega**2 + k[0] * omega + k[1],
        k[2] * omega**2 + k[3] * omega + k[4],
        k[5] * omega**2 + k[6] * omega + k[7],
    )
    a, b, c = quadratic
    root = 2.0 * c / (-b + float(np.sqrt(b * b - 4.0 * a * c)))
    return 1e6 * root**4


def air_index(
    vacuum_wavelength_nm: float,
    *,
    temperature_c: float,
    pressure_hpa: float,
    humidity_percent: float,
) -> float:
    """n of moist air at ``vacuum_wavelength_nm``; 0-60 C, 600-1200 hPa, 0-100 %."""
    sigma2 = (1000.0 / vacuum_wavelength_nm) ** 2
    pressure = 100.0 * pressure_hpa
    vapour = humidity_percent / 100.0 * saturation_pressure_pa(temperature_c)
    standard = 1e-8 * (
        8342.54 + 2406147.0 / (130.0 - sigma2) + 15998.0 / (38.9 - sigma2)
    )
    compression = (1.0 + 1e-8 * (0.601 - 0.00972 * temperature_c) * pressure) / (
        1.0 + 0.0036610 * temperature_c
    )
    dry = pressure * standard * compression / 96095.43
    wet = 1e-10 * 292.75 / (temperature_c + 273.15) * (3.7345 - 0.0401 * sigma2)
    return 1.0 + dry - wet * vapour
