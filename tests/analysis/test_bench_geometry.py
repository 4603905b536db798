"""The model of the fit: signs of the lab frame, and derivatives against differences."""

import numpy as np
import pytest

from pitchsweep.analysis.bench_geometry import N_LOCAL, Local, landing


def local_rows(n: int = 60, seed: int = 3) -> np.ndarray:
    rng = np.random.default_rng(seed)
    local = np.zeros((n, N_LOCAL))
    local[:, Local.Q] = rng.choice([-2, -1, 0, 1, 2], n) * 0.5
    local[:, Local.INCIDENCE] = rng.uniform(-0.6, 0.6, n)
    for column in (Local.AZIMUTH, Local.TILT, Local.ELEVATION):
        local[:, column] = rng.normal(0.0, 0.03, n)
    for column in (Local.BEAM_X, Local.BEAM_Y, Local.SURFACE):
        local[:, column] = rng.normal(0.0, 1.0, n)
    local[:, Local.DISTANCE] = rng.normal(250.0, 5.0, n)
    for column in (Local.SCREEN_TX, Local.SCREEN_TY, Local.SCREEN_TZ):
        local[:, column] = rng.normal(0.0, 0.05, n)
    local[:, Local.SCREEN_X] = rng.normal(0.0, 3.0, n)
    local[:, Local.SCREEN_Y] = rng.normal(0.0, 3.0, n)
    local[:, Local.COVER] = rng.normal(0.6, 0.3, n)
    local[:, Local.INDEX] = rng.normal(0.0, 0.05, n)
    for column in (Local.WEDGE_G, Local.WEDGE_H):
        local[:, column] = rng.normal(0.0, 0.01, n)
    local[:, Local.TRACK] = rng.choice([-0.05, 0.05], n)
    local[:, Local.BEAM_RMS] = rng.uniform(0.1, 0.5, n)
    local[:, Local.CURVATURE] = rng.normal(0.0, 1e-4, n)
    local[:, Local.DISTORTION] = rng.normal(0.0, 1e-7, n)
    return local


def plain(incidence_deg: float, q: float) -> np.ndarray:
    local = np.zeros((1, N_LOCAL))
    local[0, Local.INCIDENCE] = np.deg2rad(incidence_deg)
    local[0, Local.Q] = q
    local[0, Local.DISTANCE] = 250.0
    return local


@pytest.mark.parametrize("far", [0.0, 1.0])
@pytest.mark.parametrize("column", [c for c in Local if c is not Local.FAR])
def test_derivatives_equal_central_differences(column: Local, far: float) -> None:
    local = local_rows()
    local[:, Local.FAR] = far
    there = landing(local)
    small = {Local.DISTANCE: 1e-5, Local.DISTORTION: 1e-10, Local.CURVATURE: 1e-8}
    step = small.get(column, 1e-6)
    up, down = local.copy(), local.copy()
    up[:, column] += step
    down[:, column] -= step
    ahead, behind = landing(up), landing(down)
    slope = np.stack([ahead.x_mm - behind.x_mm, ahead.y_mm - behind.y_mm], axis=1)
    slope /= 2.0 * step
    # Close to grazing and far out a difference is too coarse for these digits.
    keep = there.valid & (there.leaving > 0.2) & (np.abs(there.x_mm) < 1000.0)
    assert keep.sum() > 35
    np.testing.assert_allclose(
        there.jacobian[keep][:, :, column], slope[keep], rtol=3e-6, atol=2e-5
    )


def test_zero_order_moves_to_plus_x_by_twice_the_angle() -> None:
    there = landing(plain(10.0, 0.0))
    assert there.x_mm[0] == pytest.approx(250.0 * np.tan(np.deg2rad(20.0)), abs=1e-9)
    assert there.y_mm[0] == pytest.approx(0.0, abs=1e-12)


def test_positive_orders_lie_on_the_plus_x_side_of_the_zero_order() -> None:
    zero, plus = landing(plain(5.0, 0.0)), landing(plain(5.0, 0.4))
    assert plus.x_mm[0] > zero.x_mm[0]


def test_littrow_order_returns_along_the_beam() -> None:
    q = 0.7
    littrow = np.rad2deg(np.arcsin(q / 2.0))
    assert landing(plain(littrow, -q)).x_mm[0] == pytest.approx(0.0, abs=1e-9)


def test_order_that_does_not_leave_is_told_and_finite() -> None:
    there = landing(plain(30.0, 0.8))
    assert not there.valid[0]
    assert there.leaving[0] == 0.0
    assert np.isfinite(there.x_mm[0]) and np.isfinite(there.jacobian).all()
