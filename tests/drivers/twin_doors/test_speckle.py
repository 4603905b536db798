"""Speckle statistics: fully developed, with the stated grain, fixed to its place.

The intensity of fully developed speckle is exponential: contrast 1, and the share
above t times the mean is exp(-t) (J. W. Goodman, Speckle Phenomena in Optics, ch. 3).
"""

import numpy as np
import pytest

from pitchsweep.drivers.twin.rays import FloatArray
from pitchsweep.drivers.twin.speckle import SpeckleKey, speckle_pattern

KEY = SpeckleKey(seed=1, mount=0, laser="red", angle_cell=180)


def pattern(key: SpeckleKey = KEY, grain_px: float = 2.0) -> FloatArray:
    return speckle_pattern(
        key, first_row=-40, first_column=70, shape=(400, 500), grain_px=grain_px
    )


def test_intensity_is_exponential() -> None:
    light = pattern()
    assert light.mean() == pytest.approx(1.0, abs=0.02)
    assert light.std() == pytest.approx(1.0, abs=0.03)
    for level in (0.5, 1.0, 2.0, 3.0):
        assert np.mean(light > level) == pytest.approx(np.exp(-level), abs=0.012)


@pytest.mark.parametrize("grain_px", [2.0, 4.0, 8.0])
def test_grain_is_the_full_width_of_the_autocorrelation(grain_px: float) -> None:
    light = pattern(grain_px=grain_px) - 1.0
    half = int(grain_px) // 2
    for axis in (0, 1):
        moved = np.roll(light, half, axis=axis)
        assert np.mean(light * moved) == pytest.approx(0.5, abs=0.08)


def test_a_smaller_rectangle_cuts_the_same_pattern() -> None:
    inner = speckle_pattern(
        KEY, first_row=3, first_column=131, shape=(20, 30), grain_px=2.0
    )
    np.testing.assert_allclose(inner, pattern()[43:63, 61:91])


@pytest.mark.parametrize(
    "other",
    [
        SpeckleKey(2, 0, "red", 180),
        SpeckleKey(1, 1, "red", 180),
        SpeckleKey(1, 0, "green", 180),
        SpeckleKey(1, 0, "red", 184),
    ],
)
def test_another_angle_wavelength_or_mount_decorrelates(other: SpeckleKey) -> None:
    correlation = np.mean((pattern() - 1.0) * (pattern(other) - 1.0))
    assert abs(correlation) < 0.03
