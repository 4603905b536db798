"""Spot positions: scatter against the bound and against the stated error.

Run: python tests/benchmarks/spot_accuracy.py [frames per row] [known]; "known" tells
the finder the true speckle. Twelve coordinates a frame; 40 frames a row take a minute.
Prints, per row, the
number of coordinates, recall, false spots a frame, rms error, rms error / Cramér-Rao
bound (pixel-level Fisher information of amplitude, centre, widths and background
plane, from the true spot; under speckle the quasi-likelihood bound with the true Ac),
pull rms (error / stated error) and the time a step. Seeds are 0..n-1.
"""

import sys
import time
from collections.abc import Sequence
from pathlib import Path

import cv2
import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from spot_frames import Scene, TrueSpot, camera, expose  # noqa: E402

from pitchsweep.analysis.camera_noise import CameraNoise  # noqa: E402
from pitchsweep.analysis.speckle_grain import Speckle  # noqa: E402
from pitchsweep.analysis.spot_search import find_spots  # noqa: E402

TIMES_MS = (20.0, 2.0)
KNOWN = "known" in sys.argv


def draw_spots(
    rng: np.random.Generator, noise: CameraNoise, columns: int, rows: int
) -> list[TrueSpot]:
    """Six spots, one 500 times the faintest, SNR 10-200 at 20 ms, on a loose grid."""
    quiet = float(np.sqrt(noise.variance_dn2(noise.black_level_dn + 20.0)))
    snrs = np.geomspace(10.0, 200.0, 5)
    heights = [quiet * snr / 20.0 for snr in snrs]
    brightest = 0.2 * (noise.saturation_dn - noise.black_level_dn) / 2.0
    heights.append(min(heights[0] * 500.0, brightest))
    spots = []
    for k, height in enumerate(rng.permutation(heights)):
        sigma = rng.uniform(2.5, 6.0)
        spots.append(
            TrueSpot(
                column_px=(k % 3 + 0.5 + rng.uniform(-0.2, 0.2)) * columns / 3,
                row_px=(k // 3 + 0.5 + rng.uniform(-0.2, 0.2)) * rows / 2,
                height=float(height),
                sigma=(sigma, sigma * rng.uniform(0.8, 1.0)),
                angle_rad=rng.uniform(0, np.pi),
            )
        )
    return spots


def bound_px(
    spot: TrueSpot, scene: Scene, noise: CameraNoise, times_ms: Sequence[float]
) -> tuple[float, float]:
    """Least standard error of column and row, by numerical derivatives."""
    reach = int(6 * max(spot.sigma))
    x = np.arange(-reach, reach + 1)[None, :] + round(spot.column_px) - spot.column_px
    y = np.arange(-reach, reach + 1)[:, None] + round(spot.row_px) - spot.row_px
    c, s = np.cos(spot.angle_rad), np.sin(spot.angle_rad)

    def model(p: np.ndarray) -> np.ndarray:
        u, v = x - p[1], y - p[2]
        q = p[3] * u * u + 2 * p[4] * u * v + p[5] * v * v
        return p[0] * np.exp(-q / 2) + p[6] + p[7] * x + p[8] * y

    i1, i2 = 1 / spot.sigma[0] ** 2, 1 / spot.sigma[1] ** 2
    shape = [c * c * i1 + s * s * i2, c * s * (i1 - i2), s * s * i1 + c * c * i2]
    p0 = np.array([spot.height, 0, 0, *shape, 0, 0, 0])
    steps = np.array([1e-4 * spot.height, *[1e-4] * 2, *[1e-6] * 3, 1e-3, 1e-4, 1e-4])
    rows = [
        (model(p0 + d) - model(p0 - d)).ravel() / (2 * h)
        for d, h in zip(np.diag(steps), steps, strict=True)
    ]
    jacobian = np.array(rows)
    signal = model(p0)
    information = np.zeros_like(signal)
    for t in times_ms:
        level = noise.black_level_dn + t * (scene.background_dn_per_ms)
        var = noise.variance_dn2(level) + noise.gain_dn_per_e * t * signal
        peak_ok = level + t * signal < noise.saturation_dn
        information += np.where(peak_ok, t * t / var, 0.0)
    area = np.pi * (scene.grain_fwhm_px / 1.665) ** 2 * scene.speckle_contrast**2
    weight = 1 / (1 / np.maximum(information, 1e-12) + area * signal**2)
    covariance = np.linalg.inv((jacobian * weight.ravel()) @ jacobian.T)
    return float(covariance[1, 1] ** 0.5), float(covariance[2, 2] ** 0.5)


def one_row(bits: int, contrast: float, grain: float, frames: int) -> str:
    """One line of the table."""
    noise = camera(bits)
    given = Speckle(contrast, grain) if KNOWN else None
    errors, bounds, stated = [], [], []
    missed = false = total = 0
    spent = 0.0
    for seed in range(frames):
        rng = np.random.default_rng([seed, bits, int(10 * grain * contrast)])
        spots = draw_spots(rng, noise, 1280, 400)
        scene = Scene(
            spots,
            columns=1280,
            rows=400,
            background_dn_per_ms=1.0 * 2.0 ** (bits - 12),
            speckle_contrast=contrast,
            grain_fwhm_px=grain,
        )
        exposures, dark = expose(scene, noise, TIMES_MS, seed)
        begin = time.perf_counter()
        answer = find_spots(exposures, dark, noise, seed, speckle=given)
        spent += time.perf_counter() - begin
        matched = 0
        for spot in spots:
            total += 1
            near = [
                s
                for s in answer.spots
                if np.hypot(s.column_px - spot.column_px, s.row_px - spot.row_px) < 8
            ]
            if not near:
                missed += 1
                continue
            matched += 1
            s = near[0]
            errors += [s.column_px - spot.column_px, s.row_px - spot.row_px]
            stated += [s.covariance_px2[0][0] ** 0.5, s.covariance_px2[1][1] ** 0.5]
            bounds += bound_px(spot, scene, noise, TIMES_MS)
        false += len(answer.spots) - matched
    e, b, u = np.array(errors), np.array(bounds), np.array(stated)
    ratio = np.sqrt(np.mean((e / b) ** 2))
    pull = np.sqrt(np.mean((e / u) ** 2))
    plain = float(np.sqrt(np.mean(e**2)))
    return (
        f"{bits:4d} {contrast:8.1f} {grain:6.1f} {e.size:7d} {1 - missed / total:7.4f}"
        f" {false / frames:7.3f} {plain:8.4f} {ratio:8.3f} {pull:7.3f}"
        f" {1000 * spent / frames:8.1f}"
    )


def main() -> None:
    """Print the table."""
    frames = int(sys.argv[1]) if len(sys.argv) > 1 else 40
    cv2.setNumThreads(1)
    print(
        "bits contrast  grain  coords  recall  false/f   rms_px  rms/crb    pull    ms"
    )
    for bits in (12, 8):
        for contrast, grain in ((0.0, 2.0), (1.0, 2.0), (1.0, 3.0), (0.6, 4.0)):
            print(one_row(bits, contrast, grain, frames), flush=True)


if __name__ == "__main__":
    main()
