"""Covers, curved grooves and a camera at infinity: the fit's model against others.

The twin's rays take every refraction in full and know nothing of the fit's formulas;
Snell's law by hand (plane angles and sines only) judges both.
"""

from dataclasses import replace
from math import asin, sin, tan

import numpy as np
import pytest
import twin_scene as scene
from builders import demo_job, twin_sweep

from pitchsweep.analysis.bench_geometry import N_LOCAL, Local, landing
from pitchsweep.analysis.measure import measure_pitch
from pitchsweep.analysis.part_ray import COVER_INDEX
from pitchsweep.configs.bench_model import Bench
from pitchsweep.drivers.twin.optics import trace_orders
from pitchsweep.drivers.twin.truth import BeamTruth, MountTruth, PartTruth, Truth

PITCH_NM = 1600.0
DISTANCE_MM = 250.0
ANGLES_DEG = [-60.0, -35.0, -12.0, 5.0, 20.0, 48.0, 70.0]
DIAMETER_MM = 1.0


def snell_by_hand(a: float, q: float, index: float, wedge: float) -> float:
    """Direction from the grooves' normal of the order of a covered grating.

    ``a`` incidence from the grooves' normal, ``q`` m*lambda/d, ``wedge`` the lean of
    the front's normal towards +x of the grooves'; all in one plane.
    """
    down = asin(sin(a + wedge) / index) - wedge
    up = asin(sin(down) + q / index)
    return asin(index * sin(up - wedge)) + wedge


def local_of(truth: Truth, bench: Bench, angle_deg: float) -> np.ndarray:
    """The fit's local quantities for the orders of one step, as the truth has them."""
    order = trace_orders(truth, bench, scene.steps(angle_deg)).order
    part = truth.part
    local = np.zeros((len(order), N_LOCAL))
    ratio = truth.air_wavelength_mm("red") / truth.grating_period_mm()
    local[:, Local.Q] = order * ratio
    local[:, Local.INCIDENCE] = np.radians(angle_deg)
    local[:, Local.DISTANCE] = DISTANCE_MM
    local[:, Local.COVER] = part.cover_mm
    local[:, Local.INDEX] = part.cover_index - COVER_INDEX
    local[:, Local.WEDGE_G] = part.wedge_across_rad
    local[:, Local.WEDGE_H] = part.wedge_along_rad
    if part.track_radius_mm:
        local[:, Local.TRACK] = 1.0 / part.track_radius_mm
        local[:, Local.BEAM_RMS] = DIAMETER_MM / 4.0
    local[:, Local.BEAM_X] = truth.beam.offset_mm
    local[:, Local.BEAM_Y] = truth.beam.height_mm
    local[:, Local.ELEVATION] = truth.beam.elevation_rad
    local[:, Local.AZIMUTH] = truth.mounts[0].groove_azimuth_rad
    # A positive tilt of the twin is a right-handed turn about +x.
    local[:, Local.TILT] = -truth.mounts[0].part_tilt_rad
    local[:, Local.SURFACE] = truth.mounts[0].surface_offset_mm
    local[:, Local.FAR] = bench.screen.kind == "camera-at-infinity"
    return local


SEAT = MountTruth(0.0, 0.01, 0.008, 0.3)
BEAM = BeamTruth(0.004, 0.5, 1.0)


def worst_mm(
    part: PartTruth,
    kind: str = "flat-screen",
    beam: BeamTruth = BEAM,
    seat: MountTruth = SEAT,
) -> float:
    """Furthest that fit and twin are from each other on the screen, in mm."""
    bench = scene.bench()
    screen = bench.screen.model_copy(update={"kind": kind})
    bench = bench.model_copy(update={"screen": screen})
    truth = scene.ideal(bench, scene.part(PITCH_NM))
    truth = replace(truth, part=part, beam=beam, mounts=(seat,) * 8)
    worst = 0.0
    for angle in ANGLES_DEG:
        seen = trace_orders(truth, bench, scene.steps(angle))
        model = landing(local_of(truth, bench, angle))
        keep = seen.visible[0] & model.valid
        off = np.hypot(
            model.x_mm - seen.place_mm[0, :, 0], model.y_mm - seen.place_mm[0, :, 1]
        )
        worst = max(worst, float(np.max(off[keep], initial=0.0)))
        assert keep.any() or abs(angle) > 50.0
    return worst


def test_an_even_cover_is_the_same_in_fit_and_twin() -> None:
    assert worst_mm(PartTruth(0.6, 1.58)) < 1e-9


def test_a_wedge_agrees_to_its_square() -> None:
    small = worst_mm(PartTruth(0.6, 1.5, 5e-4, -3e-4))
    assert small < 1e-3
    assert worst_mm(PartTruth(0.6, 1.5, 2e-3, -1.2e-3)) < 20.0 * small


def test_curved_grooves_agree_with_rays_over_the_whole_beam() -> None:
    bent, still = PartTruth(track_radius_mm=25.0), MountTruth(0.0, 0.0, 0.0, 0.0)
    assert worst_mm(bent, beam=BeamTruth(0.0, 0.5, 0.0), seat=still) < 1e-4
    # What the tilt of the seat does to the place on the part is left out in the fit.
    assert worst_mm(bent) < 0.06


def test_a_camera_at_infinity_agrees_and_does_not_see_the_cover() -> None:
    assert worst_mm(PartTruth(0.6, 1.58), "camera-at-infinity") < 1e-9


@pytest.mark.parametrize("a", [-0.6, -0.3, 0.0, 0.4, 0.6])
@pytest.mark.parametrize("order", [-1, 0, 1])
def test_a_wedged_cover_turns_orders_as_snells_law_by_hand(
    a: float, order: int
) -> None:
    q, index, wedge = order * 0.4, 1.55, 1e-3
    b = snell_by_hand(a, q, index, wedge)
    local = np.zeros((1, N_LOCAL))
    for column, value in (
        (Local.Q, q),
        (Local.INCIDENCE, a),
        (Local.WEDGE_G, wedge),
        (Local.DISTANCE, DISTANCE_MM),
        (Local.FAR, 1.0),
    ):
        local[:, column] = value
    there = landing(local)
    if abs(a + b) < 1.3:
        assert there.x_mm[0] == pytest.approx(DISTANCE_MM * tan(a + b), abs=2e-3)


def test_the_twins_wedge_is_snells_law_by_hand() -> None:
    bench = scene.bench()
    screen = bench.screen.model_copy(update={"kind": "camera-at-infinity"})
    bench = bench.model_copy(update={"screen": screen})
    part = PartTruth(0.6, 1.55, 3e-3, 0.0)
    truth = replace(scene.ideal(bench, scene.part(PITCH_NM)), part=part)
    ratio = truth.air_wavelength_mm("red") / truth.grating_period_mm()
    seen = trace_orders(truth, bench, scene.steps(20.0))
    for m, place in zip(seen.order, seen.place_mm[0], strict=True):
        if abs(m) <= 1:
            a = np.radians(20.0)
            b = snell_by_hand(a, m * ratio, 1.55, np.arctan(np.tan(3e-3)))
            assert place[0] == pytest.approx(DISTANCE_MM * tan(a + b), abs=1e-9)


def test_curved_grooves_look_wider_apart_by_half_the_square_of_their_turn() -> None:
    """At normal incidence the far field of order m is at q times the mean cosine.

    The grooves under a Gaussian beam of rms radius s turn by y/R, so that the component
    across is q <cos(y/R)> = q (1 - s^2 / (2 R^2)) (derived here, no source).
    """
    turn, q = 0.01, 0.3
    local = np.zeros((1, N_LOCAL))
    local[0, [Local.Q, Local.DISTANCE, Local.FAR]] = q, 1.0, 1.0
    straight = landing(local).x_mm[0]
    local[0, [Local.BEAM_RMS, Local.TRACK]] = 25.0 * turn, 1.0 / 25.0
    # x = p / sqrt(1 - q^2) with p the component across: the sum of squares stays q^2.
    bent = landing(local).x_mm[0]
    assert bent / straight == pytest.approx(1.0 - turn**2 / 2.0, abs=turn**4)


def test_a_declared_width_keeps_the_overrunning_beam_out() -> None:
    """Steep steps, at which the beam may be cut, are left out and said to be."""
    effects = {"part_edge_mm": 1.2}
    wide = {"start_deg": -75.0, "stop_deg": 75.0, "step_deg": 3.0}
    job = demo_job("shims-spots", effects=effects, recipe=wide)
    sweep = twin_sweep(job, 2)
    part = job.part.model_copy(update={"clear_width_mm": 4.0})
    result = measure_pitch(sweep.table, bench=job.bench, part=part)
    kept = np.abs(result.table.stage_deg).max()
    # 0.75 mm and twice hypot(0.5, 0.3 sin a) mm must be within 2 mm * cos a.
    assert kept == 24.0
    reasons = {row["reason"] for row in result.rejected_counts()}
    assert "beam-wider-than-the-part" in reasons
    assert not any("clipping" in item for item in result.assumed_absent)
    plain = measure_pitch(sweep.table, bench=job.bench, part=job.part)
    assert any("clipping" in item for item in plain.assumed_absent)
