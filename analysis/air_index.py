"""Refractive index of air, and how far the air's own uncertainty moves it."""

import math
from dataclasses import dataclass

from pitchsweep.analysis.analysis_errors import InputRefused
from pitchsweep.analysis.propagation import propagated, slopes
from pitchsweep.analysis.records import FloatArray

EQUATION_U = 1e-8
"""What the equation itself is good for (common practice, no source)."""


@dataclass(frozen=True)
class AirState:
    """Air beside the part: temperature (deg C), pressure (hPa), humidity (%)."""

    temperature_C: float
    pressure_hPa: float
    humidity_percent: float


def air_index(vacuum_wavelength_nm: float, air: AirState) -> float:
    """The refractive index of air for a vacuum wavelength in nanometres.

    Modified Edlen equation, as documented in the NIST Engineering Metrology Toolbox
    (Stone & Zimmerman). Raises InputRefused outside 350-900 nm, 0-50 deg C,
    600-1200 hPa, 0-100 % (the range in which it was compared with published rows).
    """
    _check_range("wavelength", vacuum_wavelength_nm, 350.0, 900.0, "nm")
    _check_range("air temperature", air.temperature_C, 0.0, 50.0, "deg C")
    _check_range("air pressure", air.pressure_hPa, 600.0, 1200.0, "hPa")
    _check_range("relative humidity", air.humidity_percent, 0.0, 100.0, "%")
    s = (1000.0 / vacuum_wavelength_nm) ** 2
    t, p = air.temperature_C, air.pressure_hPa * 100.0
    standard = 1e-8 * (8342.54 + 2406147.0 / (130.0 - s) + 15998.0 / (38.9 - s))
    x = (1.0 + 1e-8 * (0.601 - 0.00972 * t) * p) / (1.0 + 0.0036610 * t)
    dry = p * standard * x / 96095.43
    vapour_pa = air.humidity_percent / 100.0 * saturation_pressure_pa(t)
    moist = 1e-10 * (292.75 / (t + 273.15)) * (3.7345 - 0.0401 * s) * vapour_pa
    return 1.0 + dry - moist


def saturation_pressure_pa(temperature_c: float) -> float:
    """Saturation vapour pressure of water in pascal (IAPWS, as in the same page)."""
    k = temperature_c + 273.15
    n = (
        1167.0521452767,
        -724213.16703206,
        -17.073846940092,
        12020.82470247,
        -3232555.0322333,
        14.91510861353,
        -4823.2657361591,
        405113.40542057,
        -0.23855557567849,
        650.17534844798,
    )
    theta = k + n[8] / (k - n[9])
    a = theta**2 + n[0] * theta + n[1]
    b = n[2] * theta**2 + n[3] * theta + n[4]
    c = n[5] * theta**2 + n[6] * theta + n[7]
    root = 2.0 * c / (-b + math.sqrt(b * b - 4.0 * a * c))
    return 1e6 * float(root**4)


def air_index_u(vacuum_wavelength_nm: float, air: AirState, u: AirState) -> float:
    """Standard uncertainty of the index from the air's (fields of ``u``)."""

    def index(air: FloatArray) -> float:
        return air_index(vacuum_wavelength_nm, AirState(*(float(v) for v in air)))

    # The steps go towards the middle of the range and so stay inside it.
    steps = (
        0.1 if air.temperature_C < 25.0 else -0.1,
        1.0 if air.pressure_hPa < 900.0 else -1.0,
        1.0 if air.humidity_percent < 50.0 else -1.0,
    )
    slope = slopes(
        index, (air.temperature_C, air.pressure_hPa, air.humidity_percent), steps
    )
    inputs = propagated(slope, (u.temperature_C, u.pressure_hPa, u.humidity_percent))
    return math.hypot(math.sqrt(inputs[0, 0]), EQUATION_U)


def _check_range(what: str, value: float, low: float, high: float, unit: str) -> None:
    if not low <= value <= high:
        raise InputRefused(f"{what} = {value:g} {unit}: allowed {low:g} to {high:g}")
