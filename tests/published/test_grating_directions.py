"""The fit's grating equation against published angles and directions.

Codes: V seen at the issuing body, S seen in a secondary copy, C recomputed.
"""

import numpy as np
import pytest

from pitchsweep.analysis.bench_geometry import N_LOCAL, Local, order_direction


def direction(
    *, incidence_deg: float, q: float, azimuth_deg: float = 0.0, tilt_deg: float = 0.0
) -> np.ndarray:
    local = np.zeros((1, N_LOCAL))
    local[0, Local.INCIDENCE] = np.deg2rad(incidence_deg)
    local[0, Local.AZIMUTH] = np.deg2rad(azimuth_deg)
    local[0, Local.TILT] = np.deg2rad(tilt_deg)
    local[0, Local.Q] = q
    return order_direction(local)[0][0]


def test_conical_directions_of_two_ray_tracers() -> None:
    """600 lines/mm, 632.99 nm, turned 17 deg, tilted 0.4 deg, grooves 1.3 deg.

    Two general-purpose ray tracers and a direct calculation agree on these (C). They
    send the beam along +z; turned half a turn about y into our frame x and z change
    sign, the order changes sign, and so does the groove angle.
    """
    q = 632.99e-6 * 600.0
    zero = direction(incidence_deg=17.0, q=0.0, azimuth_deg=-1.3, tilt_deg=0.4)
    first = direction(incidence_deg=17.0, q=-q, azimuth_deg=-1.3, tilt_deg=0.4)
    turn = np.array([-1.0, 1.0, -1.0])
    np.testing.assert_allclose(
        zero * turn, [-0.55916565, 0.01335210, -0.82894843], atol=1e-8
    )
    np.testing.assert_allclose(
        first * turn, [-0.20767332, 0.02224612, -0.97794525], atol=1e-8
    )


@pytest.mark.parametrize(
    ("lines_per_mm", "wavelength_nm", "order", "published_deg", "tolerance_deg"),
    [
        # OpenStax College Physics ch. 27: statement S, numbers from memory, C.
        (1000.0, 380.0, 1, 22.33, 0.006),
        (1000.0, 760.0, 1, 49.46, 0.006),
        # Worked problems, S and C; the third source truncates instead of rounding.
        (200.0, 640.0, 1, 7.354, 0.0006),
        (160.0, 460.0, 2, 8.46, 0.0101),
        (160.0, 640.0, 2, 11.81, 0.0101),
        (160.0, 460.0, 3, 12.75, 0.0101),
        (160.0, 640.0, 3, 17.89, 0.0101),
        (160.0, 460.0, 4, 17.12, 0.0101),
        (500.0, 550.0, 1, 16.0, 0.05),
    ],
)
def test_textbook_angles_at_normal_incidence(
    lines_per_mm: float,
    wavelength_nm: float,
    order: int,
    published_deg: float,
    tolerance_deg: float,
) -> None:
    q = order * wavelength_nm * 1e-6 * lines_per_mm
    out = direction(incidence_deg=0.0, q=q)
    angle = np.rad2deg(np.arctan2(out[0], out[2]))
    assert angle == pytest.approx(published_deg, abs=tolerance_deg)


def test_order_beyond_the_horizon_does_not_leave() -> None:
    """30 deg, 2400/mm, 700 nm: sin b = 1.18 (an optics maker's tutorial, S)."""
    local = np.zeros((1, N_LOCAL))
    local[0, Local.INCIDENCE] = np.deg2rad(-30.0)
    local[0, Local.Q] = 700e-6 * 2400.0
    assert order_direction(local)[1][0] < 0.0
    assert local[0, Local.Q] - 0.5 == pytest.approx(1.18, abs=0.005)


@pytest.mark.parametrize(
    ("wavelength_nm", "pitch_nm", "order", "littrow_deg"),
    [
        # Littrow formula S in several places; values C.
        (632.8, 1e6 / 1200.0, 1, 22.3139),
        (632.8, 740.0, 1, 25.3133),
        (632.8, 1600.0, 1, 11.4054),
        (632.8, 1600.0, 3, 36.3880),
        (532.0, 740.0, 1, 21.0670),
        (405.0, 320.0, 1, 39.2579),
        (351.1, 212.7777, 1, 55.5925),
    ],
)
def test_littrow_angle_sends_the_order_back(
    wavelength_nm: float, pitch_nm: float, order: int, littrow_deg: float
) -> None:
    out = direction(incidence_deg=littrow_deg, q=-order * wavelength_nm / pitch_nm)
    assert np.rad2deg(np.arctan2(out[0], out[2])) == pytest.approx(0.0, abs=2e-4)


@pytest.mark.parametrize(
    ("pitch_nm", "order", "incidence_deg", "elevation_deg", "expected"),
    [
        # Direct calculation with direction cosines (C); no published example found.
        (1600.0, 1, 20.0, 0.0, (0.0534799, 0.0)),
        (1600.0, 1, 20.0, 1.0, (0.0535319, -0.0174524)),
        (740.0, 1, 25.0, 2.0, (0.4327743, -0.0348995)),
    ],
)
def test_out_of_plane_beam_in_direction_cosines(
    pitch_nm: float,
    order: int,
    incidence_deg: float,
    elevation_deg: float,
    expected: tuple[float, float],
) -> None:
    """beta_x = -alpha_x + m lambda/d, beta_y = -alpha_y along g and the grooves.

    The rows put the beam at direction cosines (cos e sin a, sin e); ours comes from
    an incidence at which k.g = -cos e sin a.
    """
    e = np.deg2rad(elevation_deg)
    local = np.zeros((1, N_LOCAL))
    local[0, Local.INCIDENCE] = -np.deg2rad(incidence_deg)
    local[0, Local.ELEVATION] = -e
    local[0, Local.Q] = order * 632.8 / pitch_nm
    out = order_direction(local)[0][0]
    a = local[0, Local.INCIDENCE]
    along_g = out @ np.array([np.cos(a), 0.0, -np.sin(a)])
    assert along_g == pytest.approx(expected[0], abs=2e-7)
    assert out[1] == pytest.approx(expected[1], abs=2e-7)
