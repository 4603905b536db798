"""Spot positions in 5-megapixel frames: scatter against the bound and the stated u.

Run: python tests/benchmarks/spot_accuracy.py [frames a clean row] [a speckle row]
(150 and 60). Fourteen coordinates a frame; seeds 0..n-1. Prints, per row: coordinates,
recall, false spots a frame, rms error over the Cramér-Rao bound (quasi-likelihood
bound under speckle) for the finder, for the oracle (least squares with true weights
from the true start) and for a threshold with components and moments; rms of error over
stated error; and the time a frame. Speckle is unknown to the finder.
"""

import sys
import time
from dataclasses import dataclass, field
from pathlib import Path

import cv2
import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from plain_methods import components_moments  # noqa: E402
from spot_bounds import bound_px, oracle_error_px  # noqa: E402
from wide_frames import TIME_MS, wide_frame, wide_scene  # noqa: E402

from pitchsweep.analysis.spot_search import Exposure, find_spots  # noqa: E402

NEAR_PX = 8.0


@dataclass
class Tally:
    """What a row collects; lists hold one entry a coordinate."""

    found: list[float] = field(default_factory=list)
    pulls: list[float] = field(default_factory=list)
    oracle: list[float] = field(default_factory=list)
    plain: list[float] = field(default_factory=list)
    spots: int = 0
    missed: int = 0
    false: int = 0
    ms: list[float] = field(default_factory=list)


def one_frame(
    tally: Tally, seed: int, bits: int, contrast: float, grain_px: float
) -> None:
    """Adds one frame to the tally."""
    scene, noise = wide_scene(seed, bits, contrast=contrast, grain_px=grain_px)
    frame = wide_frame(scene, noise, seed)
    begin = time.perf_counter()
    answer = find_spots([Exposure(frame, TIME_MS)], None, noise, seed)
    tally.ms.append(1e3 * (time.perf_counter() - begin))
    plain = components_moments(frame)
    matched = 0
    for spot in scene.spots:
        bound = bound_px(spot, scene, noise, TIME_MS)
        oracle = oracle_error_px(spot, scene, noise, TIME_MS, frame)
        tally.spots += 1
        tally.oracle += [e / b for e, b in zip(oracle, bound, strict=True)]
        away = [
            np.hypot(s.column_px - spot.column_px, s.row_px - spot.row_px)
            for s in answer.spots
        ]
        near = int(np.argmin(away)) if away else -1
        if near < 0 or away[near] > NEAR_PX:
            tally.missed += 1
            continue
        matched += 1
        s = answer.spots[near]
        error = (s.column_px - spot.column_px, s.row_px - spot.row_px)
        stated = (s.covariance_px2[0][0] ** 0.5, s.covariance_px2[1][1] ** 0.5)
        tally.found += [e / b for e, b in zip(error, bound, strict=True)]
        tally.pulls += [e / u for e, u in zip(error, stated, strict=True)]
        tally.plain += _plain_ratio(plain, spot.column_px, spot.row_px, bound)
    tally.false += len(answer.spots) - matched


def _plain_ratio(
    plain: list[tuple[float, float]],
    column: float,
    row: float,
    bound: tuple[float, float],
) -> list[float]:
    near = [p for p in plain if np.hypot(p[0] - column, p[1] - row) < 20.0]
    if not near:
        return []
    best = min(near, key=lambda p: np.hypot(p[0] - column, p[1] - row))
    return [(best[0] - column) / bound[0], (best[1] - row) / bound[1]]


def one_row(bits: int, contrast: float, grain_px: float, frames: int) -> str:
    """One line of the table."""
    tally = Tally()
    for seed in range(frames):
        one_frame(tally, seed, bits, contrast, grain_px)

    def rms(values: list[float]) -> float:
        return float(np.sqrt(np.mean(np.square(values)))) if values else float("nan")

    return (
        f"{bits:4d} {contrast:8.1f} {grain_px:5.1f} {2 * tally.spots:7d}"
        f" {1 - tally.missed / tally.spots:7.4f} {tally.false / frames:7.3f}"
        f" {rms(tally.found):9.3f} {rms(tally.oracle):7.3f} {rms(tally.plain):8.2f}"
        f" {rms(tally.pulls):6.3f} {np.median(tally.ms):7.1f}"
    )


def main() -> None:
    """Print the table."""
    clean = int(sys.argv[1]) if len(sys.argv) > 1 else 150
    grainy = int(sys.argv[2]) if len(sys.argv) > 2 else 60
    cv2.setNumThreads(1)
    print(
        "bits contrast grain  coords  recall false/f rms/bound  oracle  moments"
        "  pull      ms"
    )
    rows = [(12, 0.0, 2.0, clean), (8, 0.0, 2.0, clean)]
    rows += [(12, 1.0, grain, grainy) for grain in (2.0, 3.0, 4.0)]
    rows.append((8, 1.0, 2.0, grainy))
    for bits, contrast, grain, frames in rows:
        if frames:
            print(one_row(bits, contrast, grain, frames), flush=True)


if __name__ == "__main__":
    main()
