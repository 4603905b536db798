"""Hazard figures against published worked examples.

Codes: V seen at the issuing body, S seen in a secondary copy only, C recomputed, M from
memory, not seen. Nearly all here are S or M: a person must check them against the
primary documents (ICNIRP 2013, IEC 60825-1, ANSI Z136.1) before anyone relies on them.
"""

import math

import pytest

from pitchsweep.safety.exposure_limits import (
    blue_factor,
    eye_limit,
    pupil_area_m2,
    skin_limit_w_m2,
    t1_s,
    t2_s,
)
from pitchsweep.safety.hazard_distances import (
    diffuse_distance_m,
    direct_distance_m,
    disc_irradiance_w_m2,
    lens_distance_m,
    one_over_e,
    optical_density,
    power_through_mw,
)
from pitchsweep.safety.laser_class import class_1_limit_mw

W_M2_PER_MW_CM2 = 10.0
W_M2_PER_W_CM2 = 1e4


def test_irradiance_of_a_beam_of_one_centimetre() -> None:
    """10 W over 1 cm: 12.7 W/cm2. A university's appendix X, 2015, after AS/NZS IEC
    60825 (S): a person must check the primary document."""
    irradiance = disc_irradiance_w_m2(10e3, 10.0) / W_M2_PER_W_CM2
    assert irradiance == pytest.approx(12.7, abs=0.05)


def test_limit_of_an_argon_line_for_a_short_look() -> None:
    """488 nm, 0.25 s: 0.64 mJ/cm2, that is 2.55 mW/cm2. The same appendix (S): a person
    must check the primary document."""
    limit = eye_limit(488.0, 0.25)
    assert limit.dose_j_m2 / 10.0 == pytest.approx(0.64, abs=0.005)
    assert limit.irradiance_w_m2 / W_M2_PER_MW_CM2 == pytest.approx(2.55, abs=0.006)
    assert limit.rule == "thermal"


def test_optical_density_of_an_example() -> None:
    """3.8 W/cm2 against 2.55 mW/cm2: density 3.2. The same appendix (S): a person must
    check the primary document."""
    assert optical_density(3.8, 2.55e-3) == pytest.approx(3.2, abs=0.03)


@pytest.mark.parametrize(
    ("power_mw", "published_m", "slack_m"), [(1e3, 225.0, 1.5), (5e3, 500.0, 0.5)]
)
def test_hazard_distance_of_one_milliradian(
    power_mw: float, published_m: float, slack_m: float
) -> None:
    """1 W: 225 m (rounded up from 223.6), 5 W: 500 m, visible, 0.25 s, 1 mrad. Two
    institutions' guides (S): a person must check the primary document."""
    limit = eye_limit(532.0, 0.25).irradiance_w_m2
    distance = direct_distance_m(power_mw, limit, divergence_mrad=1.0, beam_mm=0.0)
    assert distance == pytest.approx(published_m, abs=slack_m)


def test_a_pointer_over_the_pupil() -> None:
    """2 mW over the 0.385 cm2 of a 7 mm pupil: 5.19e-3 W/cm2. Univ. Florida EHS mail in
    an archive of IIT (S): a person must check the primary document."""
    assert pupil_area_m2() * 1e4 == pytest.approx(0.385, abs=0.0002)
    irradiance = disc_irradiance_w_m2(2.0, 7.0) / W_M2_PER_W_CM2
    assert irradiance == pytest.approx(5.19e-3, abs=0.01e-3)


def test_limit_of_a_pointer() -> None:
    """651 nm, 0.25 s: 6.36e-4 J/cm2, 2.5e-3 W/cm2. The same mail (S): a person must
    check the primary document."""
    limit = eye_limit(651.0, 0.25)
    assert limit.dose_j_m2 / W_M2_PER_W_CM2 == pytest.approx(6.36e-4, abs=0.005e-4)
    assert limit.irradiance_w_m2 / W_M2_PER_W_CM2 == pytest.approx(2.5e-3, abs=5e-5)


@pytest.mark.parametrize("wavelength_nm", [400.0, 450.0, 550.0, 633.0, 700.0])
def test_power_into_the_pupil_for_a_blink(wavelength_nm: float) -> None:
    """400-700 nm, 0.25 s, 7 mm: 0.98 mW. A transcription of ICNIRP 2013 tables 5 and 8
    (S): a person must check the primary document."""
    limit = eye_limit(wavelength_nm, 0.25)
    assert limit.pupil_power_mw == pytest.approx(0.98, abs=0.005)


@pytest.mark.parametrize("exposure_s", [10.0, 100.0, 3e4])
def test_limits_of_the_red_gas_laser(exposure_s: float) -> None:
    """633 nm from 10 s: eye 1 mW/cm2, skin 200 mW/cm2. A guide p. 104 after EN
    60825-1:2014 (S): a person must check the primary document."""
    eye = eye_limit(633.0, exposure_s).irradiance_w_m2
    assert eye / W_M2_PER_MW_CM2 == pytest.approx(1.0)
    skin = skin_limit_w_m2(633.0, exposure_s)
    assert skin / W_M2_PER_MW_CM2 == pytest.approx(200.0)


@pytest.mark.parametrize(
    ("disc_mm", "published_w_m2"), [(7.0, 25984.48), (20.5, 3029.72)]
)
def test_one_watt_over_two_discs(disc_mm: float, published_w_m2: float) -> None:
    """github.com/PablitoE/MyNotebooks (S): a person must check the primary document."""
    assert disc_irradiance_w_m2(1e3, disc_mm) == pytest.approx(
        published_w_m2, abs=0.005
    )


def test_an_extended_source() -> None:
    """550 nm, 10 mrad: 120 J/m2 at 1 s; T2 = 12.198 s; 64.2 W/m2 beyond. A public test
    text (S): a person must check the primary document."""
    assert eye_limit(550.0, 1.0, source_mrad=10.0).dose_j_m2 == pytest.approx(120.0)
    assert t2_s(10.0) == pytest.approx(12.198, abs=0.0005)
    for exposure_s in (12.2, 100.0, 3e4):
        limit = eye_limit(550.0, exposure_s, source_mrad=10.0)
        assert limit.irradiance_w_m2 == pytest.approx(64.2, abs=0.05)


def test_class_1_for_long_viewing() -> None:
    """Visible: 0.39 mW, a manufacturer quoting JIS C6802 (S); 0.039 mW up to 450 nm, a
    guide p. 105 after EN 60825-1:2014 (S). Both are the eye's limit times the pupil,
    rounded: a person must check the primary document."""
    assert class_1_limit_mw(633.0) == 0.39
    assert class_1_limit_mw(405.0) == pytest.approx(0.039)
    night = eye_limit(633.0, 3e4).pupil_power_mw
    assert night == pytest.approx(0.39, abs=0.006)
    assert eye_limit(405.0, 3e4).pupil_power_mw == pytest.approx(0.039, abs=0.0006)


# Power W, divergence mrad, limit W/m2; direct, matt in m (OSHA Technical Manual III-6).
OSHA_ROWS = [
    (100.0, 2.0, 16.0, 1410.0, 1.4),
    (100.0, 2.0, 51.0, 792.0, 0.79),
    (500.0, 2.0, 1e3, 399.0, 0.4),
    (5.0, 1.0, 1e-2, 25.2e3, 12.6),
    (5.0, 1.0, 25.0, 505.0, 0.25),
]


@pytest.mark.parametrize(
    ("power_w", "spread_mrad", "limit_w_m2", "direct_m", "matt_m"), OSHA_ROWS
)
def test_distances_of_a_table_of_hazard_zones(
    power_w: float,
    spread_mrad: float,
    limit_w_m2: float,
    direct_m: float,
    matt_m: float,
) -> None:
    """OSHA Technical Manual III-6 (M: the page was found, its table was not seen; C:
    the formulas give all of it). A person must check the primary document."""
    power_mw = power_w * 1e3
    direct = direct_distance_m(
        power_mw, limit_w_m2, divergence_mrad=spread_mrad, beam_mm=0.0
    )
    assert direct == pytest.approx(direct_m, rel=0.003)
    assert diffuse_distance_m(power_mw, limit_w_m2) == pytest.approx(matt_m, rel=0.02)


@pytest.mark.parametrize(("limit_w_m2", "published_m"), [(16.0, 11.4), (51.0, 6.4)])
def test_distance_behind_a_lens(limit_w_m2: float, published_m: float) -> None:
    """100 W, focal length 25.4 mm, 6.3 mm on the lens: 11.4 m for 8 h, 6.4 m for 10 s.
    The same table (M, C): a person must check the primary document."""
    distance = lens_distance_m(100e3, limit_w_m2, focal_mm=25.4, beam_mm=6.3)
    assert distance == pytest.approx(published_m, rel=0.01)


@pytest.mark.parametrize(
    ("wavelength_nm", "published_w_m2"),
    [(405.0, 1.0), (445.0, 1.0), (450.0, 1.0), (488.0, 5.75), (500.0, 10.0)],
)
def test_limits_of_a_night(wavelength_nm: float, published_w_m2: float) -> None:
    """30 000 s. The photochemical formula is M, these figures are C: a person must
    check the primary document."""
    limit = eye_limit(wavelength_nm, 3e4)
    assert limit.irradiance_w_m2 == pytest.approx(published_w_m2, abs=0.005)


def test_factors_of_the_regulations() -> None:
    """C_B, T1, T2 as on arbeidstilsynet.no, s. 11-5 (V)."""
    assert [blue_factor(nm) for nm in (400.0, 450.0)] == [1.0, 1.0]
    assert blue_factor(500.0) == pytest.approx(10.0)
    assert [t1_s(nm) for nm in (420.0, 450.0)] == [10.0, 10.0]
    assert [t1_s(nm) for nm in (500.0, 600.0)] == pytest.approx([100.0, 100.0])
    assert t2_s(1.5) == 10.0
    assert t2_s(100.0) == pytest.approx(100.0)


@pytest.mark.parametrize(
    ("power_mw", "beam_mm", "limit_w_m2", "computed_m"),
    [
        (5.0, 0.0, 25.456, 15.81),
        (5.0, 1.0, 25.456, 14.81),
        (5.0, 1.0, 10.0, 24.23),
        (1.0, 1.0, 25.456, 6.07),
    ],
)
def test_distances_of_weak_beams(
    power_mw: float, beam_mm: float, limit_w_m2: float, computed_m: float
) -> None:
    """Recomputed elsewhere from the formula (C); the formula itself is S: a person must
    check the primary document."""
    distance = direct_distance_m(
        power_mw, limit_w_m2, divergence_mrad=1.0, beam_mm=beam_mm
    )
    assert distance == pytest.approx(computed_m, abs=0.01)


def test_density_for_a_strong_diode() -> None:
    """35 mW into 7 mm for 0.25 s needs density 1.55 (C, formula S): a person must check
    the primary document."""
    limit = eye_limit(640.0, 0.25).irradiance_w_m2
    assert optical_density(disc_irradiance_w_m2(35.0, 7.0), limit) == pytest.approx(
        1.55, abs=0.005
    )


def test_a_gaussian_beam_in_its_own_disc() -> None:
    """1 - exp(-2) = 86.5 % passes an aperture of the 1/e2 diameter; the 1/e diameter is
    smaller by the square root of two (mathematics of the Gaussian, formula M)."""
    assert power_through_mw(1.0, 7.0) == pytest.approx(0.8646647, abs=1e-7)
    within = power_through_mw(1.0, 1.0, one_over_e(1.0))
    assert within == pytest.approx(1.0 - math.exp(-1.0))
