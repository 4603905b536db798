"""Parts of the spot finder: noise, background, speckle, pixel map, image bytes."""

import cv2
import numpy as np
import pytest
from numpy.typing import NDArray
from spot_frames import speckle

from pitchsweep.analysis.analysis_errors import InputRefused
from pitchsweep.analysis.camera_noise import CameraNoise, measured_noise_dn
from pitchsweep.analysis.frame_background import background_map
from pitchsweep.analysis.frame_image import decode_frame, in_low_bits
from pitchsweep.analysis.pixel_map import (
    pixels_from_screen,
    screen_from_pixels,
    spot_on_screen,
)
from pitchsweep.analysis.records import Spot
from pitchsweep.analysis.speckle_grain import NO_SPECKLE, Speckle
from pitchsweep.analysis.speckle_pool import pooled_speckle, restated_share
from pitchsweep.configs.bench_model import Camera

CAMERA = Camera(
    width_px=640,
    height_px=400,
    mm_per_px=0.25,
    centre_column_px=320.0,
    centre_row_px=200.0,
)


def test_noise_of_the_bench_file_in_digital_numbers() -> None:
    noise = CameraNoise.from_bench(CAMERA)
    assert noise.read_noise_dn**2 == pytest.approx((0.4 * 4.0) ** 2 + 1 / 12)
    assert noise.saturation_dn == 4095.0
    assert noise.variance_dn2(164.0) == pytest.approx(
        0.4 * 100 + noise.read_noise_dn**2
    )


def test_noise_read_off_a_frame_is_near_what_made_it() -> None:
    rng = np.random.default_rng(1)
    light = np.linspace(20.0, 2000.0, 500)[None, :] * np.ones((400, 1))
    value = 0.5 * rng.poisson(light / 0.5) + 100.0 + rng.normal(0, 5.0, light.shape)
    frame = np.rint(value).astype(np.uint16)
    noise = CameraNoise.estimated_from(frame, bits=12)
    assert noise.gain_dn_per_e == pytest.approx(0.5, rel=0.1)
    assert noise.variance_dn2(1100.0) == pytest.approx(525.0, rel=0.1)


@pytest.mark.parametrize("sigma", [0.4, 1.0, 5.0])
def test_measured_noise_is_not_led_by_gradient_or_hot_pixels(sigma: float) -> None:
    rng = np.random.default_rng(2)
    smooth = 100.0 + np.linspace(0, 50, 600)[None, :] * np.ones((300, 1))
    value = smooth + rng.normal(0, sigma, smooth.shape)
    value.flat[rng.integers(0, value.size, 50)] += 2000
    frame = np.rint(value).astype(np.uint16)
    expected = np.hypot(sigma, (1 / 12) ** 0.5)
    assert measured_noise_dn(frame) == pytest.approx(expected, rel=0.1)


def test_background_follows_a_gradient_under_a_wide_spot() -> None:
    y, x = np.mgrid[0:100, 0:320].astype(np.float32)
    smooth = 80.0 + 0.1 * x + 0.05 * y
    spot = 500.0 * np.exp(-((x - 150) ** 2 + (y - 50) ** 2) / (2 * 8.0**2))
    rng = np.random.default_rng(3)
    small = (smooth + spot + rng.normal(0, 0.5, x.shape)).astype(np.float32)
    away = np.abs(background_map(small) - smooth)
    assert float(away.max()) < 2.0
    assert float(np.median(away)) < 0.3


def test_noise_area_is_the_measured_power_of_drawn_speckle_at_long_waves() -> None:
    """Outside check: speckle drawn as |filtered complex noise|^2, averaged in blocks.

    Source: fully developed speckle by definition (circular complex Gaussian field).
    """
    grains = speckle((512, 512), 3.0, np.random.default_rng(4))
    assert grains.mean() == pytest.approx(1.0, abs=0.02)
    assert grains.std() == pytest.approx(1.0, abs=0.05)
    blocks = grains.reshape(16, 32, 16, 32).mean(axis=(1, 3))
    assert blocks.var() * 32**2 == pytest.approx(
        Speckle(1.0, 3.0).noise_area(), rel=0.25
    )


def test_pooled_speckle_is_a_mean_over_steps_whatever_their_order() -> None:
    assert pooled_speckle([]) is None
    seen = [Speckle(0.9, 2.2), Speckle(1.0, 2.0), Speckle(1.1, 1.9)]
    pooled = pooled_speckle(seen)
    assert pooled is not None
    assert pooled.contrast == pytest.approx((0.81 + 1.0 + 1.21) ** 0.5 / 3**0.5)
    assert pooled_speckle(seen[::-1]) == pytest.approx(pooled)
    assert pooled_speckle([NO_SPECKLE, NO_SPECKLE, Speckle(1.0, 2.0)]) == NO_SPECKLE


def test_the_speckle_part_of_a_covariance_follows_the_noise_area() -> None:
    own, pooled = Speckle(0.5, 4.0), Speckle(1.0, 4.0)
    assert restated_share(own, pooled) == pytest.approx(4.0)
    assert restated_share(NO_SPECKLE, pooled) == 1.0
    assert restated_share(None, pooled) == 1.0


def test_rows_grow_downwards_and_covariance_turns_with_them() -> None:
    assert screen_from_pixels(324.0, 196.0, CAMERA) == pytest.approx((1.0, 1.0))
    assert pixels_from_screen(1.0, 1.0, CAMERA) == pytest.approx((324.0, 196.0))
    spot = Spot(
        column_px=324.0,
        row_px=196.0,
        covariance_px2=((0.04, 0.01), (0.01, 0.09)),
        peak_dn_per_ms=1.0,
        sigma_px=(3.0, 3.0),
        angle_rad=0.0,
        snr=10.0,
        exposure_ms=2.0,
        saturated=False,
    )
    place = spot_on_screen(spot, CAMERA)
    assert (place.ux_mm, place.uy_mm) == pytest.approx((0.05, 0.075))
    assert place.cxy_mm2 == pytest.approx(-0.01 * 0.25**2)


@pytest.mark.parametrize("suffix", [".png", ".tiff", ".pgm"])
@pytest.mark.parametrize("depth", [np.uint8, np.uint16])
def test_images_read_back_pixel_for_pixel(
    suffix: str, depth: type[np.uint8] | type[np.uint16]
) -> None:
    image = np.arange(64 * 65).reshape(64, 65).astype(depth)
    _, raw = cv2.imencode(suffix, image)
    frame = decode_frame(raw.tobytes(), name="a")
    assert frame.dtype == np.uint16
    assert np.array_equal(frame, image)


def test_values_in_the_high_bits_are_moved_down() -> None:
    low = np.random.default_rng(5).integers(0, 4096, (64, 64)).astype(np.uint16)
    assert np.array_equal(in_low_bits(low << np.uint16(4), bits=12, name="a"), low)
    assert np.array_equal(in_low_bits(low, bits=12, name="a"), low)
    dark = low // 64 + 64
    assert np.array_equal(in_low_bits(dark << np.uint16(4), bits=12, name="a"), dark)


def test_values_too_large_and_not_aligned_are_refused() -> None:
    frame = np.random.default_rng(6).integers(0, 65535, (64, 64)).astype(np.uint16)
    with pytest.raises(InputRefused, match="0 to 4095"):
        in_low_bits(frame, bits=12, name="frames/1.png")


def _coloured() -> bytes:
    image = np.zeros((64, 64, 3), np.uint8)
    image[..., 2] = 7
    return bytes(cv2.imencode(".png", image)[1].tobytes())


def _floating() -> bytes:
    image: NDArray[np.float32] = np.zeros((64, 64), np.float32)
    return bytes(cv2.imencode(".tiff", image)[1].tobytes())


@pytest.mark.parametrize("content", [b"", b"no image", _coloured(), _floating()])
def test_what_is_no_grey_image_of_whole_numbers_is_refused(content: bytes) -> None:
    with pytest.raises(InputRefused, match=r"f\.png.*\n.*grey"):
        decode_frame(content, name="f.png")
