"""What the camera makes of expected electrons: noise, hot pixels, gain, quantising."""

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from pitchsweep.configs.bench_model import Camera
from pitchsweep.drivers.twin.keyed_noise import keyed_generator
from pitchsweep.drivers.twin.rays import FloatArray


def hot_pixels(
    seed: int, camera: Camera, count: int
) -> tuple[NDArray[np.int64], FloatArray]:
    """Flat indices of the hot pixels and their excess in DN per second; both (count,).

    The same for every frame of a seed.
    """
    generator = keyed_generator(seed, "hot pixels")
    size = camera.width_px * camera.height_px
    places = generator.choice(size, size=min(count, size), replace=False)
    full = 2.0**camera.bits
    rates = full * 10.0 ** generator.uniform(0.0, 2.5, size=places.shape)
    return places.astype(np.int64), rates


_hot_pixels = lru_cache(maxsize=4)(hot_pixels)


def digitise(
    electrons: FloatArray,
    *,
    camera: Camera,
    exposure_ms: float,
    seed: int,
    hot_count: int,
    noise: np.random.Generator,
) -> NDArray[np.uint16]:
    """A frame in digital numbers (rows, columns) from expected electrons.

    Shot noise is Gaussian with the Poisson variance. Values stop at the full scale of
    the camera's bits. ``electrons`` is not modified.
    """
    deviate = noise.standard_normal(electrons.shape, dtype=np.float32)
    expected = electrons.astype(np.float32)
    spread = np.sqrt(expected + np.float32(camera.read_noise_e**2))
    expected += deviate * spread
    expected *= np.float32(camera.gain_dn_per_e)
    expected += np.float32(camera.black_level_dn)
    if hot_count > 0:
        places, rates = _hot_pixels(seed, camera, hot_count)
        expected.reshape(-1)[places] += (rates * exposure_ms * 1e-3).astype(np.float32)
    full_scale = float(2**camera.bits - 1)
    np.rint(expected, out=expected)
    np.clip(expected, 0.0, full_scale, out=expected)
    return expected.astype(np.uint16)
