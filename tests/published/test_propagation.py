"""Our propagation of uncertainty on the worked examples of the guides.

Codes: S seen in a secondary copy, M from memory, C recomputed with independent code.
"""

import math

import numpy as np
import pytest
from numpy.typing import NDArray

from pitchsweep.analysis.decision import coverage_factor, effective_dof
from pitchsweep.analysis.propagation import propagated, slopes

Floats = NDArray[np.float64]


def test_gum_h1_end_gauge() -> None:
    """GUM H.1: 50 000 838 nm, u = 32 nm, nu_eff 16, U99 = 93 nm.

    Inputs, length and components 25, 16.599, 6.7, 5.8, 3.9, 2.887: GTC documentation
    (S); u 31.66, nu_eff 16.75 C; U99 M. The two last inputs enter at second order
    only; with that order the guide gives 34 nm, which is not ours to compute.
    """

    def length(inputs: Floats) -> float:
        standard, mean, random, bias, d_alpha, d_theta, alpha, theta = inputs
        return float(
            standard
            + mean
            + random
            + bias
            - standard * (d_alpha * theta + alpha * d_theta)
        )

    at = (50_000_623.0, 215.0, 0.0, 0.0, 0.0, 0.0, 11.5e-6, -0.1)
    steps = (1.0, 1.0, 1.0, 1.0, 1e-9, 1e-3, 1e-9, 1e-3)
    u = np.array(
        [
            25.0,
            5.8,
            3.9,
            6.7,
            1e-6 / math.sqrt(3.0),
            0.05 / math.sqrt(3.0),
            2e-6 / math.sqrt(3.0),
            math.hypot(0.2, 0.5 / math.sqrt(2.0)),
        ]
    )
    slope = slopes(length, at, steps)
    assert length(np.array(at)) == pytest.approx(50_000_838.0, abs=0.5)
    parts = np.abs(slope[0] * u)
    published = [25.0, 5.8, 3.9, 6.7, 2.887, 16.599, 0.0, 0.0]
    np.testing.assert_allclose(parts, published, atol=2e-3)
    assert math.sqrt(propagated(slope, u)[0, 0]) == pytest.approx(31.66, abs=0.01)
    dof = (18.0, 24.0, 5.0, 8.0, 50.0, 2.0, math.inf, math.inf)
    effective = effective_dof(list(zip(parts.tolist(), dof, strict=True)))
    assert effective == pytest.approx(16.75, abs=0.05)
    assert coverage_factor(0.99, 16.0) * 31.66 == pytest.approx(93.0, abs=1.0)


def test_gum_h2_correlated_readings() -> None:
    """GUM H.2: R, X, Z of a resistor from voltage, current and phase read together.

    Raw readings M (their means and u match the source); results and correlations
    S (GTC documentation, rounded) and C exact.
    """
    voltage = np.array([5.007, 4.994, 5.005, 4.990, 4.999])
    current = np.array([19.663, 19.639, 19.640, 19.685, 19.678]) * 1e-3
    phase = np.array([1.0456, 1.0438, 1.0468, 1.0428, 1.0433])
    readings = np.stack([voltage, current, phase])
    at, u = readings.mean(axis=1), readings.std(axis=1, ddof=1) / math.sqrt(5.0)

    def impedance(inputs: Floats) -> Floats:
        v, i, phi = inputs
        z = v / i
        return np.array([z * math.cos(phi), z * math.sin(phi), z])

    slope = slopes(impedance, at, 0.1 * u)
    covariance = propagated(slope, u, np.corrcoef(readings))
    found = np.sqrt(np.diag(covariance))
    np.testing.assert_allclose(impedance(at), [127.732, 219.847, 254.260], atol=6e-4)
    np.testing.assert_allclose(found, [0.071, 0.295, 0.236], atol=6e-4)
    r = covariance / np.outer(found, found)
    assert r[0, 1] == pytest.approx(-0.588, abs=6e-4)
    assert r[0, 2] == pytest.approx(-0.485, abs=6e-4)
    assert r[1, 2] == pytest.approx(0.993, abs=6e-4)


def test_pitch_from_two_angles_as_gtc_gives_it() -> None:
    """d = lambda / (sin a + sin b): GTC 1.5.1 gives both figures (C)."""

    def pitch_m(inputs: Floats) -> float:
        wavelength_nm, a, b = inputs
        return float(wavelength_nm * 1e-9 / (math.sin(a) + math.sin(b)))

    at = np.array([632.991, math.radians(20.0), math.radians(25.0)])
    u = np.array([0.001, 2e-5, 5e-5])
    slope = slopes(pitch_m, at, 0.1 * u)
    assert pitch_m(at) == pytest.approx(8.278305089123e-07, rel=1e-12)
    found = math.sqrt(propagated(slope, u)[0, 0])
    assert found == pytest.approx(5.3128471719e-11, rel=1e-8)
