"""The twin's diffracted directions against values from outside the program.

Sources, with how they were verified (the collection of facts beside the project):
- conical directions for 600 lines/mm, 632.99 nm, beam along +z, grating turned 17 deg
  about y, tilted 0.4 deg about x, grooves 1.3 deg about z: two open ray tracers
  (optiland 0.6.3 and rayoptics 0.9) and a direct calculation agree;
- direction cosines of row G9: derived from the direction-cosine form of the grating
  equation (verification code D/C: derived and recomputed with independent code);
- rows G1-G3: textbook angles (OpenStax College Physics ch. 27, code S/M, recomputed;
  a problem collection for G2, G3, code S), at normal incidence;
- rows of G8: Littrow angles, formula from several pages, recomputed (code C).
"""

import numpy as np
import pytest

from pitchsweep.drivers.twin.optics import part_axes
from pitchsweep.drivers.twin.rays import FloatArray, diffract
from pitchsweep.drivers.twin.truth import MountTruth


def leaving(
    beam: list[float], axes: FloatArray, order: int, ratio: float
) -> tuple[FloatArray, bool]:
    direction, leaves = diffract(
        np.array(beam), axes[:, 2], axes[:, 0], np.array([order * ratio])
    )
    return direction, bool(leaves)


@pytest.mark.parametrize(
    ("order", "published"),
    [
        (1, (-0.20767332, 0.02224612, -0.97794525)),
        (0, (-0.55916565, 0.01335210, -0.82894843)),
    ],
)
def test_reflected_directions_of_two_ray_tracers(
    order: int, published: tuple[float, float, float]
) -> None:
    """Published with the beam along +z; our part faces a beam along -z.

    Half a turn about y carries one into the other: x and z change sign, tilt and
    azimuth are seen from behind, and the order counts the other way.
    """
    mount = MountTruth(
        zero_offset_deg=0.0,
        groove_azimuth_rad=np.radians(-1.3),
        part_tilt_rad=np.radians(-0.4),
        surface_offset_mm=0.0,
    )
    axes = part_axes(np.array([np.radians(17.0)]), mount)[0]
    direction, leaves = leaving([0.0, 0.0, -1.0], axes, -order, 632.99e-6 * 600.0)
    x, y, z = published
    assert leaves
    np.testing.assert_allclose(direction, [-x, y, -z], atol=1.5e-8)


@pytest.mark.parametrize(
    ("pitch_nm", "order", "inc_deg", "out_of_plane_deg", "azimuth_deg", "cosines"),
    [
        (1600.0, 1, 20.0, 0.0, 0.0, (0.0534799, 0.0)),
        (1600.0, 1, 20.0, 1.0, 0.0, (0.0535319, -0.0174524)),
        (1600.0, 2, 20.0, 5.0, 0.0, (0.4502813, -0.0871557)),
        (740.0, 1, 25.0, 2.0, 0.0, (0.4327743, -0.0348995)),
        (740.0, 1, 25.0, 2.0, 0.5, (0.4327418, -0.0274371)),
    ],
)
def test_direction_cosines_of_row_g9(
    pitch_nm: float,
    order: int,
    inc_deg: float,
    out_of_plane_deg: float,
    azimuth_deg: float,
    cosines: tuple[float, float],
) -> None:
    inc, out, rho = np.radians([inc_deg, out_of_plane_deg, azimuth_deg])
    beam = [
        -float(np.sin(inc) * np.cos(out)),
        -float(np.sin(out)),
        -float(np.cos(inc) * np.cos(out)),
    ]
    seated = MountTruth(0.0, float(rho), 0.0, 0.0)
    axes = part_axes(np.array([0.0]), seated)[0]
    direction, leaves = leaving(beam, axes, order, 632.8 / pitch_nm)
    assert leaves
    np.testing.assert_allclose(direction[:2], cosines, atol=6e-8)


@pytest.mark.parametrize(
    ("lines_per_mm", "wavelength_nm", "order", "angle_deg", "digits_deg"),
    [
        (1000.0, 380.0, 1, 22.33, 0.006),
        (1000.0, 760.0, 1, 49.46, 0.006),
        (200.0, 640.0, 1, 7.354, 0.0006),
        (483.1, 632.8, 1, 17.8, 0.06),
        (483.1, 632.8, 2, 37.7, 0.06),
        (483.1, 632.8, 3, 66.5, 0.06),
    ],
)
def test_textbook_angles_at_normal_incidence(
    lines_per_mm: float,
    wavelength_nm: float,
    order: int,
    angle_deg: float,
    digits_deg: float,
) -> None:
    ratio = wavelength_nm * 1e-6 * lines_per_mm
    direction, leaves = leaving([0.0, 0.0, -1.0], np.eye(3), order, ratio)
    angle = np.degrees(np.arctan2(direction[0], direction[2]))
    assert leaves
    assert abs(angle - angle_deg) < digits_deg


@pytest.mark.parametrize(
    ("wavelength_nm", "pitch_nm", "order", "angle_deg"),
    [
        (632.8, 740.0, 1, 25.3133),
        (632.8, 1600.0, 1, 11.4054),
        (632.8, 1600.0, 3, 36.3880),
        (532.0, 740.0, 1, 21.0670),
        (405.0, 320.0, 1, 39.2579),
        (351.1, 212.7777, 1, 55.5925),
    ],
)
def test_at_the_littrow_angle_the_order_returns(
    wavelength_nm: float, pitch_nm: float, order: int, angle_deg: float
) -> None:
    incidence = np.array([np.radians(-angle_deg)])
    axes = part_axes(incidence, MountTruth(0.0, 0.0, 0.0, 0.0))[0]
    ratio = wavelength_nm / pitch_nm
    direction, leaves = leaving([0.0, 0.0, -1.0], axes, order, ratio)
    assert leaves
    np.testing.assert_allclose(direction, [0.0, 0.0, 1.0], atol=4e-6)


def test_an_order_that_a_tutorial_calls_evanescent_does_not_leave() -> None:
    """Row G6: incidence 30 deg, 2400 lines/mm, 700 nm: sin b = 1.18 (code S)."""
    beam = [0.5, 0.0, -float(np.sqrt(0.75))]
    direction, leaves = leaving(beam, np.eye(3), 1, 700e-6 * 2400.0)
    assert not leaves
    assert np.all(np.isfinite(direction))
    assert abs(0.7 * 2.4 - 0.5 - 1.18) < 1e-12
