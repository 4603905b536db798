"""The camera read off a run's own bracket and dark is the one that made the frames.

The relation is EMVA 1288's linear model (temporal variance = gain * light + dark
variance); truth is what the frames were drawn with. All depths that a bench file may
state, and words that hold their bits at the top, as files of such cameras do.
"""

import cv2
import numpy as np
import pytest
from numpy.typing import NDArray
from spot_frames import Scene, TrueSpot, camera, expose

from pitchsweep.analysis.bracket_noise import bracket_noise, camera_seen
from pitchsweep.analysis.camera_noise import CameraNoise
from pitchsweep.analysis.frame_image import decode_frame
from pitchsweep.analysis.photon_transfer import photon_transfer

Frame = NDArray[np.uint16]
Bracket = tuple[list[tuple[Frame, float]], NDArray[np.float32], CameraNoise]
TIMES_MS = (4.0, 20.0)
SCENE_SPOTS = [(90.0, 80.0), (200.0, 60.0), (310.0, 90.0)]


def truth(bits: int) -> CameraNoise:
    """The same sensor at every depth; 8 bit rounds its read noise away."""
    return camera(bits)


def stored(frame: Frame, bits: int, shifted: bool) -> Frame:
    """A frame as the program reads it back from a 16-bit file."""
    word = frame << (16 - bits) if shifted else frame
    done, content = cv2.imencode(".png", word.astype(np.uint16))
    assert done
    return decode_frame(content.tobytes(), name="frame", bits=bits)


def bracket(bits: int, contrast: float, shifted: bool = False) -> Bracket:
    noise = truth(bits)
    height = 0.7 * (noise.saturation_dn - noise.black_level_dn) / TIMES_MS[1]
    height /= 4.0 if contrast else 1.0
    spots = [TrueSpot(c, r, height, (6.0, 5.0)) for c, r in SCENE_SPOTS]
    scene = Scene(spots, 400, 160, height / 300, speckle_contrast=contrast)
    exposures, _ = expose(scene, noise, TIMES_MS, 3)
    # Single and whole as the darks of a run; it does not tell the hot pixels.
    rng = np.random.default_rng(9)
    read = max(noise.read_noise_dn**2 - 1 / 12, 0.0) ** 0.5
    dark = np.rint(noise.black_level_dn + read * rng.standard_normal((160, 400)))
    frames = [(stored(e.frame, bits, shifted), e.exposure_ms) for e in exposures]
    return frames, dark.astype(np.float32), noise


@pytest.mark.parametrize("bits", [8, 10, 12, 16])
@pytest.mark.parametrize("contrast", [0.0, 1.0])
def test_gain_is_that_of_the_frames_with_and_without_speckle(
    bits: int, contrast: float
) -> None:
    frames, dark, noise = bracket(bits, contrast)
    seen = bracket_noise(frames, dark, noise)
    assert seen is not None
    off = abs(seen.gain_dn_per_e - noise.gain_dn_per_e)
    assert off < max(4.0 * seen.u_gain, 0.03 * noise.gain_dn_per_e)
    assert seen.u_gain < 0.3 * noise.gain_dn_per_e
    assert seen.dark_level_dn == pytest.approx(noise.black_level_dn, rel=0.02)
    assert seen.read_noise_dn == pytest.approx(noise.read_noise_dn, rel=0.15)
    assert camera_seen(noise, seen) == noise


@pytest.mark.parametrize("bits", [10, 12])
def test_words_with_their_bits_at_the_top_give_the_same(bits: int) -> None:
    low = bracket_noise(*bracket(bits, 1.0))
    high = bracket_noise(*bracket(bits, 1.0, shifted=True))
    assert low == high


def test_a_bench_file_that_is_clearly_wrong_gives_way() -> None:
    frames, dark, noise = bracket(12, 1.0)
    wrong = CameraNoise(0.1, 2.0, 64.0, 4095.0)
    seen = camera_seen(wrong, bracket_noise(frames, dark, wrong))
    assert seen.gain_dn_per_e == pytest.approx(noise.gain_dn_per_e, rel=0.15)
    assert seen.saturation_dn == 4095.0


def test_one_exposure_no_dark_or_no_light_tell_nothing() -> None:
    frames, dark, noise = bracket(12, 0.0)
    assert bracket_noise(frames[:1], dark, noise) is None
    assert bracket_noise(frames, None, noise) is None
    dim = [(dark.astype(np.uint16), ms) for ms in TIMES_MS]
    assert bracket_noise(dim, dark, noise) is None
    assert camera_seen(noise, None) is noise


@pytest.mark.parametrize("bits", [8, 10, 12, 16])
@pytest.mark.parametrize("shifted", [False, True])
def test_pairs_of_even_frames_give_the_camera_at_every_depth(
    bits: int, shifted: bool
) -> None:
    noise = truth(bits)
    rng = np.random.default_rng(4)
    full = noise.saturation_dn - noise.black_level_dn
    read = max(noise.read_noise_dn**2 - 1 / 12, 0.0) ** 0.5

    def frame(light_dn: float) -> Frame:
        electrons = rng.poisson(light_dn / noise.gain_dn_per_e, (120, 200))
        value = electrons * noise.gain_dn_per_e + noise.black_level_dn
        value = value + read * rng.standard_normal(value.shape)
        whole = np.clip(np.rint(value), 0, noise.saturation_dn).astype(np.uint16)
        return stored(whole, bits, shifted and bits < 16)

    levels = full * np.array([0.02, 0.1, 0.2, 0.3, 0.45, 0.6, 0.95])
    seen = photon_transfer(
        [(frame(x), frame(x)) for x in levels],
        (frame(0.0), frame(0.0)),
        exposures_ms=list(levels),
    )
    assert seen.gain_dn_per_e == pytest.approx(noise.gain_dn_per_e, rel=0.03)
    assert seen.dark_level_dn == pytest.approx(noise.black_level_dn, abs=0.3)
    assert seen.linearity < 0.01
