"""Five-megapixel frames with seven spots: the scene of the spot benchmarks.

Radii 3 to 12 px, peak over background noise 10 to 200, a background gradient and 50
hot pixels. Shot noise is Poisson under the spots and normal elsewhere (50 electrons).
"""

import numpy as np
from numpy.typing import NDArray
from spot_frames import Scene, TrueSpot, camera, spot_light

from pitchsweep.analysis.camera_noise import CameraNoise

TIME_MS = 20.0
COLUMNS, ROWS = 2448, 2048


def wide_scene(
    seed: int, bits: int, *, contrast: float = 0.0, grain_px: float = 2.0
) -> tuple[Scene, CameraNoise]:
    """The scene of a seed: seven spots on a loose grid."""
    noise = camera(bits)
    rng = np.random.default_rng([seed, bits, round(10 * contrast * grain_px)])
    room = 2.0 ** (bits - 12)
    quiet = noise.variance_dn2(noise.black_level_dn + room * TIME_MS) ** 0.5
    spots = []
    for k in rng.permutation(8)[:7]:
        sigma = rng.uniform(3.0, 12.0)
        snr = float(np.exp(rng.uniform(np.log(10.0), np.log(200.0))))
        spots.append(
            TrueSpot(
                column_px=(k % 4 + 0.5 + rng.uniform(-0.3, 0.3)) * COLUMNS / 4,
                row_px=(k // 4 + 0.5 + rng.uniform(-0.3, 0.3)) * ROWS / 2,
                height=quiet * snr / TIME_MS,
                sigma=(sigma, max(sigma * rng.uniform(0.8, 1.0), 3.0)),
                angle_rad=rng.uniform(0.0, np.pi),
            )
        )
    scene = Scene(
        spots,
        columns=COLUMNS,
        rows=ROWS,
        background_dn_per_ms=room,
        hot_pixels=50,
        speckle_contrast=contrast,
        grain_fwhm_px=grain_px,
    )
    return scene, noise


def wide_frame(scene: Scene, noise: CameraNoise, seed: int) -> NDArray[np.uint16]:
    """One exposure of ``TIME_MS``, (rows, columns) in digital numbers."""
    rng = np.random.default_rng([seed, 7])
    light = spot_light(scene, rng) * TIME_MS
    x = np.linspace(-1.0, 1.0, scene.columns, dtype=np.float32)[None, :]
    y = np.linspace(-1.0, 1.0, scene.rows, dtype=np.float32)[:, None]
    room = np.float32(scene.background_dn_per_ms * TIME_MS) * (
        1.0 + np.float32(scene.gradient) * (np.float32(0.7) * x + np.float32(0.3) * y)
    )
    gain = np.float32(noise.gain_dn_per_e)
    read = np.float32(max(noise.read_noise_dn**2 - 1.0 / 12.0, 0.0))
    value = rng.standard_normal(room.shape, dtype=np.float32)
    value *= np.sqrt(gain * room + read)
    value += room
    lit = light > 0.0
    value[lit] += rng.poisson(light[lit] / gain) * gain
    value += np.float32(noise.black_level_dn)
    places = rng.integers(0, value.size, scene.hot_pixels)
    hot = rng.uniform(0.05, 0.8, scene.hot_pixels) * noise.saturation_dn
    value.flat[places] += hot.astype(np.float32)
    np.rint(value, out=value)
    np.clip(value, 0.0, noise.saturation_dn, out=value)
    return value.astype(np.uint16)
