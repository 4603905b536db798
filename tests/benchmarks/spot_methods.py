"""The finder beside what a user would otherwise take: time, recall, error/bound.

Run: python tests/benchmarks/spot_methods.py [frames] [frames for slow ones] (12, 2).
Frames of 2448 x 2048, 12 bit, seven spots, clean and under fully developed speckle of
grain 2 px; seeds 0..n-1; one thread. The last column is time over the finder's time.
Needs the ``bench`` extra.
"""

import sys
import time
from collections.abc import Callable
from pathlib import Path

import cv2
import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from plain_methods import METHODS, Frame, Places  # noqa: E402
from spot_bounds import bound_px  # noqa: E402
from wide_frames import TIME_MS, wide_frame, wide_scene  # noqa: E402

from pitchsweep.analysis.camera_noise import CameraNoise  # noqa: E402
from pitchsweep.analysis.spot_search import Exposure, find_spots  # noqa: E402

NEAR_PX = 8.0
FAST = ("pitchsweep", "OpenCV components+moments", "OpenCV SimpleBlobDetector")


def finder(noise: CameraNoise) -> Callable[[Frame], Places]:
    """The finder as a method like the others."""

    def find(frame: Frame) -> Places:
        answer = find_spots([Exposure(frame, TIME_MS)], None, noise, 0)
        return [(s.column_px, s.row_px) for s in answer.spots]

    return find


def one_method(
    name: str, method: Callable[[Frame], Places], contrast: float, frames: int
) -> tuple[str, float]:
    """One line of the table and the time a frame, ms."""
    times, ratios = [], []
    missed = false = total = 0
    for seed in range(frames):
        scene, noise = wide_scene(seed, 12, contrast=contrast)
        frame = wide_frame(scene, noise, seed)
        begin = time.perf_counter()
        places = method(frame)
        times.append(1e3 * (time.perf_counter() - begin))
        matched = 0
        for spot in scene.spots:
            total += 1
            away = [np.hypot(x - spot.column_px, y - spot.row_px) for x, y in places]
            if not away or min(away) > NEAR_PX:
                missed += 1
                continue
            matched += 1
            x, y = places[int(np.argmin(away))]
            bound = bound_px(spot, scene, noise, TIME_MS)
            ratios += [(x - spot.column_px) / bound[0], (y - spot.row_px) / bound[1]]
        false += len(places) - matched
    rms = float(np.sqrt(np.mean(np.square(ratios)))) if ratios else float("nan")
    ms = float(np.median(times))
    line = (
        f"{name:32s} {contrast:8.1f} {frames:6d} {1 - missed / total:7.3f}"
        f" {false / frames:8.2f} {rms:10.2f} {ms:9.1f}"
    )
    return line, ms


def main() -> None:
    """Print the table."""
    fast = int(sys.argv[1]) if len(sys.argv) > 1 else 12
    slow = int(sys.argv[2]) if len(sys.argv) > 2 else 2
    cv2.setNumThreads(1)
    print(
        "method                           contrast frames  recall  false/f  rms/bound"
    )
    print(" " * 58 + "ms/frame   times ours")
    noise = wide_scene(0, 12)[1]
    for contrast in (0.0, 1.0):
        methods = {"pitchsweep": finder(noise), **METHODS}
        own = float("nan")
        for name, method in methods.items():
            count = fast if name in FAST else slow
            try:
                line, ms = one_method(name, method, contrast, count)
            except ImportError as error:
                print(f"{name:32s} {error}: install the bench extra")
                continue
            own = ms if name == "pitchsweep" else own
            print(f"{line} {ms / own:10.1f}", flush=True)


if __name__ == "__main__":
    main()
