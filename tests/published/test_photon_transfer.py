"""Photon transfer gives back the camera that made the frames.

The relations are those of EMVA 1288 (release 4, linear model): variance over dark =
K * mean over dark, temporal variance from pairs, fit to 70 % of saturation, rounding
1/12. Verified: signal-to-noise of its worked numbers (quantum efficiency 0.65, K = 0.1,
dark noise 2.5 e, 5000 photons: SNR 56.88) follows from the model used here.
"""

import numpy as np
import pytest
from numpy.typing import NDArray

from pitchsweep.analysis.camera_noise import CameraNoise
from pitchsweep.analysis.photon_transfer import pair_statistics, photon_transfer

SHAPE = (200, 300)
TIMES_MS = (1.0, 2.0, 5.0, 10.0, 15.0, 20.0, 25.0, 30.0, 40.0)


def frame(
    rng: np.random.Generator, electrons: float, gain: float, read_e: float, full: float
) -> NDArray[np.uint16]:
    """A frame with a fixed pattern of 2 % beside its noise."""
    pattern = 1.0 + 0.02 * np.random.default_rng(5).standard_normal(SHAPE)
    light = np.minimum(rng.poisson(electrons * pattern), full)
    value = gain * (light + read_e * rng.standard_normal(SHAPE)) + 20.0
    return np.clip(np.rint(value), 0, 4095).astype(np.uint16)


@pytest.mark.parametrize(("gain", "read_e"), [(0.4, 4.0), (0.1, 8.0), (1.5, 2.5)])
def test_gain_and_dark_noise_are_those_put_in(gain: float, read_e: float) -> None:
    rng = np.random.default_rng(1)
    full = 3500.0 / gain
    pairs = [
        (
            frame(rng, t / 30.0 * full, gain, read_e, full),
            frame(rng, t / 30.0 * full, gain, read_e, full),
        )
        for t in TIMES_MS
    ]
    dark = (frame(rng, 0, gain, read_e, full), frame(rng, 0, gain, read_e, full))
    seen = photon_transfer(pairs, dark, exposures_ms=TIMES_MS)
    assert seen.gain_dn_per_e == pytest.approx(gain, rel=0.02)
    assert abs(seen.gain_dn_per_e - gain) < 4.0 * max(seen.u_gain, 0.003 * gain)
    assert seen.dark_noise_e == pytest.approx(read_e, rel=0.05)
    assert seen.dark_level_dn == pytest.approx(20.0, abs=0.1)
    assert seen.linearity < 0.01
    assert seen.camera_noise(12).saturation_dn == 4095.0


def test_the_model_gives_the_published_signal_to_noise() -> None:
    gain, electrons = 0.1, 0.65 * 5000.0
    read_dn = float(np.hypot(gain * 2.5, (1 / 12) ** 0.5))
    noise = CameraNoise(gain, read_dn, 0.0, 4095.0)
    snr = gain * electrons / noise.variance_dn2(gain * electrons) ** 0.5
    # The published 56.88 leaves out or holds the rounding in electrons: same digits.
    assert snr == pytest.approx(56.88, abs=0.1)


def test_a_fixed_pattern_is_no_noise() -> None:
    rng = np.random.default_rng(2)
    one, other = (frame(rng, 1000.0, 0.4, 4.0, 1e6) for _ in range(2))
    _, variance = pair_statistics(one, other)
    expected = 0.4**2 * (1000.0 + 16.0) + 1 / 12
    assert variance == pytest.approx(expected, rel=0.02)


def test_too_few_levels_and_unlike_frames_are_refused() -> None:
    flat = np.zeros(SHAPE, dtype=np.uint16)
    with pytest.raises(ValueError, match="levels"):
        photon_transfer([(flat, flat)], (flat, flat))
    with pytest.raises(ValueError, match="one shape"):
        pair_statistics(flat, flat[:10])
