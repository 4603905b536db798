"""Exposure limits, class and figures: where they hold, and where they refuse."""

import math

import pytest
from builders import demo_job

from pitchsweep.configs.bench_model import Bench
from pitchsweep.safety.exposure_limits import (
    TIMES_S,
    UNATTENDED_S,
    blink_counts,
    eye_limit,
    skin_limit_w_m2,
    t1_s,
    t2_s,
)
from pitchsweep.safety.hazard_figures import laser_figures, summed_hazard
from pitchsweep.safety.hazard_records import CHECK, RECORDS
from pitchsweep.safety.hazard_text import WIDTH, figures_lines, summed_line
from pitchsweep.safety.laser_class import NOT_A_CLASSIFICATION, estimate_class
from pitchsweep.safety.safety_errors import OutsideHazardLimits

BEAM_MM = 1.0


def three_lasers() -> Bench:
    return demo_job("track-740-green").bench


@pytest.mark.parametrize(
    ("wavelength_nm", "u_nm"),
    [
        (399.99, 0.0),
        (700.01, 0.0),
        (405.0, 5.01),
        (690.0, 10.5),
        (math.nan, 0.0),
        (532.0, math.nan),
        (532.0, -1.0),
    ],
)
def test_wavelengths_within_their_u_of_the_ends_are_refused(
    wavelength_nm: float, u_nm: float
) -> None:
    for refused in (eye_limit, skin_limit_w_m2):
        with pytest.raises(OutsideHazardLimits, match="400 to 700 nm"):
            refused(wavelength_nm, 1.0, u_wavelength_nm=u_nm)
    with pytest.raises(OutsideHazardLimits):
        estimate_class(wavelength_nm, 1.0, BEAM_MM, u_wavelength_nm=u_nm)


@pytest.mark.parametrize("exposure_s", [0.0, 1e-6, 3.01e4, -1.0, math.inf, math.nan])
def test_exposures_outside_the_tables_are_refused(exposure_s: float) -> None:
    with pytest.raises(OutsideHazardLimits, match="exposure"):
        eye_limit(532.0, exposure_s)
    with pytest.raises(OutsideHazardLimits, match="exposure"):
        skin_limit_w_m2(532.0, exposure_s)


@pytest.mark.parametrize("source_mrad", [0.0, 1.4, 101.0, math.nan])
def test_source_angles_outside_the_tables_are_refused(source_mrad: float) -> None:
    with pytest.raises(OutsideHazardLimits, match="source angle"):
        eye_limit(532.0, 1.0, source_mrad=source_mrad)


def test_the_whole_range_has_a_limit_at_every_time() -> None:
    for wavelength_nm in range(400, 701):
        limits = [eye_limit(wavelength_nm, t).irradiance_w_m2 for t in TIMES_S]
        for longer, shorter in zip(limits[1:], limits, strict=False):
            assert longer <= shorter * (1.0 + 1e-12)
        assert all(math.isfinite(limit) and limit > 0.0 for limit in limits)


def test_the_lower_of_the_two_rules_counts() -> None:
    assert eye_limit(405.0, 100.0).rule == "photochemical"
    assert eye_limit(405.0, 0.25).rule == "thermal"
    assert eye_limit(532.0, 3e4).rule == "thermal"
    assert eye_limit(601.0, 3e4).photochemical_w_m2 is None


def test_a_doubtful_wavelength_takes_its_worst_value() -> None:
    sure = eye_limit(490.0, 3e4).irradiance_w_m2
    doubtful = eye_limit(490.0, 3e4, u_wavelength_nm=10.0).irradiance_w_m2
    assert doubtful == eye_limit(480.0, 3e4).irradiance_w_m2 < sure


@pytest.mark.parametrize("wavelength_nm", [400.0, 430.0, 450.0, 470.0, 495.0])
def test_the_two_rules_meet_at_t1(wavelength_nm: float) -> None:
    limit = eye_limit(wavelength_nm, t1_s(wavelength_nm))
    assert limit.photochemical_w_m2 == pytest.approx(limit.thermal_w_m2)


@pytest.mark.parametrize("wavelength_nm", [400.0, 450.0, 530.0, 600.0])
def test_the_photochemical_limit_has_no_jump_at_100_s(wavelength_nm: float) -> None:
    before = eye_limit(wavelength_nm, 100.0).photochemical_w_m2
    after = eye_limit(wavelength_nm, math.nextafter(100.0, 101.0)).photochemical_w_m2
    assert before == pytest.approx(after)


def test_the_rounded_thermal_limits_meet_at_10_s_to_two_percent() -> None:
    before = eye_limit(633.0, math.nextafter(10.0, 0.0)).thermal_w_m2
    assert before == pytest.approx(eye_limit(633.0, 10.0).thermal_w_m2, rel=0.02)
    skin_before = skin_limit_w_m2(633.0, math.nextafter(10.0, 0.0))
    assert skin_before == pytest.approx(skin_limit_w_m2(633.0, 10.0), rel=0.03)


@pytest.mark.parametrize("source_mrad", [2.0, 10.0, 60.0, 100.0])
def test_the_limit_of_a_larger_source_has_no_jump(source_mrad: float) -> None:
    for joint_s in (10.0, t2_s(source_mrad)):
        sides = [
            eye_limit(650.0, joint_s * side, source_mrad=source_mrad).thermal_w_m2
            for side in (1.0 - 1e-9, 1.0 + 1e-9)
        ]
        assert sides[0] == pytest.approx(sides[1], rel=1e-6)


def test_blue_never_counts_on_the_blink_reflex() -> None:
    assert not any(blink_counts(nm) for nm in (400.0, 405.0, 445.0, 488.0, 499.9))
    assert blink_counts(532.0) and not blink_counts(500.5, 1.0)
    bench = three_lasers()
    assert laser_figures(bench, "violet").accidental_s == 100.0
    assert laser_figures(bench, "green").accidental_s == 0.25


def test_an_unattended_night_takes_thirty_thousand_seconds() -> None:
    figures = laser_figures(three_lasers(), "violet").unattended
    assert figures.exposure_s == UNATTENDED_S == 30_000.0
    assert figures.times_limit == pytest.approx(23.4, abs=0.05)
    assert figures.density == pytest.approx(math.log10(23.4), abs=0.002)


@pytest.mark.parametrize(
    ("wavelength_nm", "power_mw", "expected"),
    [
        (633.0, 0.38, "1"),
        (633.0, 0.9, "2"),
        (633.0, 1.1, "3R"),
        (633.0, 5.1, "3B"),
        (633.0, 500.0, "3B"),
        (633.0, 501.0, "4"),
        (405.0, 0.03, "1"),
        (405.0, 0.05, "3R"),
        (405.0, 0.9, "3R"),
        (405.0, 6.0, "3B"),
    ],
)
def test_a_class_estimate_with_its_reason(
    wavelength_nm: float, power_mw: float, expected: str
) -> None:
    found = estimate_class(wavelength_nm, power_mw, BEAM_MM)
    assert found.laser_class == expected
    assert "mW" in found.reason
    assert found.cautions == (NOT_A_CLASSIFICATION, CHECK)


def test_a_wide_beam_sends_less_through_the_pupil() -> None:
    assert estimate_class(633.0, 3.0, 20.0).laser_class == "2"
    assert estimate_class(633.0, 3.0, 1.0).laser_class == "3R"
    assert estimate_class(633.0, 600.0, 300.0).laser_class == "4"


def test_a_higher_class_never_comes_from_less_power() -> None:
    order = ["1", "2", "3R", "3B", "4"]
    for wavelength_nm in (400.0, 455.0, 520.0, 700.0):
        powers = [10.0 ** (exponent / 8.0) for exponent in range(-20, 30)]
        places = [
            order.index(estimate_class(wavelength_nm, p, BEAM_MM).laser_class)
            for p in powers
        ]
        assert places == sorted(places)


def test_several_lasers_add_up_rule_by_rule() -> None:
    bench = three_lasers()
    one = {name: summed_hazard(bench, [name], 3e4) for name in bench.lasers}
    together = summed_hazard(bench, list(bench.lasers), 3e4)
    assert together.thermal == pytest.approx(sum(s.thermal for s in one.values()))
    assert together.photochemical == pytest.approx(
        sum(s.photochemical for s in one.values())
    )
    assert together.worst == together.photochemical > 1.0
    assert "above the limits" in summed_line(together, list(bench.lasers))
    assert one["red"].photochemical == 0.0


def test_a_beam_within_the_limit_has_no_hazard_distance() -> None:
    figures = laser_figures(three_lasers(), "green")
    short, night = figures.at(0.25), figures.unattended
    assert (short.direct_m, short.lens_m, short.diffuse_m, short.density) == (0,) * 4
    assert night.direct_m > 1.0 and night.lens_m > night.diffuse_m > 0.0


def test_full_drive_counts_and_not_what_is_used() -> None:
    bench = three_lasers()
    strong = bench.lasers["green"].model_copy(update={"full_drive_mw": 20.0})
    bench = bench.model_copy(update={"lasers": {**bench.lasers, "green": strong}})
    assert laser_figures(bench, "green").estimate.laser_class == "3B"


def test_every_record_says_who_says_so_and_to_check_it() -> None:
    for key, record in RECORDS.items():
        assert record.key == key
        assert record.caution == CHECK and record.checked_by
        assert record.source and record.unit and record.level in "VSCDM"
        assert record.wavelength_from_nm < record.wavelength_to_nm
        assert record.time_from_s <= record.time_to_s


def test_the_figures_fit_a_page_and_carry_their_cautions() -> None:
    bench = three_lasers()
    for name in bench.lasers:
        lines = figures_lines(laser_figures(bench, name))
        text = " ".join(" ".join(lines).split())
        assert all(len(line) <= WIDTH for line in lines)
        assert CHECK in text and NOT_A_CLASSIFICATION in text
        assert "does not choose eyewear" in text and "small source" in text
