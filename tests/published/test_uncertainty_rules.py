"""Degrees of freedom, coverage factors and decisions against worked examples."""

import math

import pytest

from pitchsweep.analysis.decision import coverage_factor, decide, effective_dof
from pitchsweep.configs.part_model import Tolerance


def test_gum_h1_end_gauge_degrees_of_freedom() -> None:
    """GUM H.1: u = 32 nm (31.66), nu_eff 16.75 -> 16, t99 = 2.92, U99 = 93 nm.

    Components and u: GTC documentation of the example (S); nu_eff, t and U recomputed
    (C; the printed 2.92 and 93 are from memory).
    """
    parts = [
        (25.0, 18.0),
        (5.8, 24.0),
        (3.9, 5.0),
        (6.7, 8.0),
        (2.887, 50.0),
        (16.599, 2.0),
    ]
    u = math.sqrt(sum(p[0] ** 2 for p in parts))
    # H.1 takes the lines 2.887 and 16.599 from rectangular inputs with 50 and 2.
    assert u == pytest.approx(31.66, abs=0.2)
    dof = effective_dof(parts)
    assert dof == pytest.approx(16.75, abs=0.5)
    assert coverage_factor(0.99, 16.0) == pytest.approx(2.92, abs=0.005)
    assert coverage_factor(0.99, 16.0) * 31.66 == pytest.approx(93.0, abs=1.0)


def test_additive_normal_interval_of_jcgm_101() -> None:
    """JCGM 101 9.2: four standard normals give +-3.92 at 95 % (M, C 3.920)."""
    assert coverage_factor(0.95, math.inf) * 2.0 == pytest.approx(3.92, abs=0.001)


def test_one_sided_guard_band_factor() -> None:
    """One-sided 95 %: w = 1.645 u (formula JCGM 106 from memory, number D)."""
    tolerance = Tolerance(lower_nm=500.0, upper_nm=831.645)
    probability = decide(830.0, 1.0, 2.0, tolerance).conformance_probability
    assert probability == pytest.approx(0.95, abs=2e-4)


@pytest.mark.parametrize(
    ("pitch_nm", "outcome"),
    [
        (830.0, "conforms"),
        (825.9, "undecided"),
        (824.1, "undecided"),
        (823.9, "does-not-conform"),
        (836.1, "does-not-conform"),
        (834.5, "undecided"),
        (834.0, "conforms"),
    ],
)
def test_decision_is_guarded_by_the_expanded_uncertainty(
    pitch_nm: float, outcome: str
) -> None:
    """Supplier accepts LSL+U..USL-U only, nonconformity beyond U (ISO 14253-1, S)."""
    tolerance = Tolerance(lower_nm=825.0, upper_nm=835.0)
    assert decide(pitch_nm, 0.5, 1.0, tolerance).outcome == outcome


def test_no_tolerance_no_decision() -> None:
    assert decide(830.0, 0.5, 1.0, None).outcome is None
