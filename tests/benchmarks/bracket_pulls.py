"""A zero order 500 times brighter than the faintest: each exposure left out in turn.

Run: python tests/benchmarks/bracket_pulls.py [seeds] (40). Five orders from 400 down to
0.8 DN a ms in one bracket of four exposures; seeds 0..n-1. Prints, for the full bracket
and with each exposure left out: orders found; rms of error over stated error; rms of
the difference from the full bracket over what the photons left out explain (where they
are 5 % of the private variance or more), and over the stated error. Under speckle other
photons mean other weights, so that grains, which all exposures share, move a place
too: there the first of the two need not be 1.
"""

import sys
from collections.abc import Sequence
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from spot_frames import Scene, TrueSpot, camera, expose  # noqa: E402

from pitchsweep.analysis.records import Spot  # noqa: E402
from pitchsweep.analysis.spot_search import find_spots  # noqa: E402

TIMES_MS = (0.5, 2.0, 8.0, 20.0)
ORDERS = tuple(
    TrueSpot(column, row, height, (4.5, 4.0), 0.4)
    for column, row, height in (
        (320.3, 200.6, 400.0),
        (180.7, 210.2, 84.6),
        (460.4, 190.8, 17.9),
        (70.2, 215.5, 3.8),
        (570.6, 185.1, 0.8),
    )
)
NEAR_PX = 5.0


def near(spots: Sequence[Spot], true: TrueSpot) -> Spot | None:
    """The found spot at a true one."""
    for spot in spots:
        off = spot.column_px - true.column_px, spot.row_px - true.row_px
        if np.hypot(*off) < NEAR_PX:
            return spot
    return None


def place(spot: Spot) -> list[float]:
    """Column and row, px."""
    return [spot.column_px, spot.row_px]


def variances(spot: Spot, *, private: bool) -> list[float]:
    """Stated variances of column and row, px^2, or their private parts."""
    shared = spot.shared_px2 if private else ((0.0, 0.0), (0.0, 0.0))
    return [spot.covariance_px2[k][k] - shared[k][k] for k in range(2)]


def rms(values: Sequence[float]) -> float:
    """Root mean square; of less than ten values nothing is said."""
    return float(np.sqrt(np.mean(np.square(values)))) if len(values) > 9 else np.nan


def one_row(contrast: float, left_out: int | None, seeds: int) -> str:
    """One line of the table; ``left_out`` None: the full bracket."""
    noise, found, false = camera(12), 0, 0
    errors: list[float] = []
    changes: list[float] = []
    moves: list[float] = []
    for seed in range(seeds):
        scene = Scene(ORDERS, speckle_contrast=contrast)
        exposures, dark = expose(scene, noise, TIMES_MS, seed)
        kept = [e for k, e in enumerate(exposures) if k != left_out]
        full = find_spots(exposures, dark, noise, 0).spots
        spots = find_spots(kept, dark, noise, 0).spots
        matched = [(near(spots, true), near(full, true), true) for true in ORDERS]
        for spot, whole, true in matched:
            if spot is None or whole is None:
                continue
            found += 1
            at = np.array(place(spot))
            off = at - (true.column_px, true.row_px)
            errors += list(off / np.sqrt(variances(spot, private=False)))
            # Two answers from nested data differ by the difference of their variances.
            more = np.subtract(
                variances(spot, private=True), variances(whole, private=True)
            )
            told = more > 0.05 * np.array(variances(spot, private=True))
            moved = (at - place(whole))[told]
            changes += list(moved / np.sqrt(more[told]))
            moves += list((at - place(whole)) / np.sqrt(variances(spot, private=False)))
        false += len(spots) - sum(spot is not None for spot, _, _ in matched)
    name = "none" if left_out is None else f"{TIMES_MS[left_out]:g} ms"
    share = found / (seeds * len(ORDERS))
    return (
        f"{contrast:8.1f} {name:>9s} {share:7.3f} {false / seeds:8.3f}"
        f" {len(errors):7d} {rms(errors):7.3f} {len(changes):8d} {rms(changes):7.3f}"
        f" {rms(moves):8.3f}"
    )


def main() -> None:
    """Print the table."""
    seeds = int(sys.argv[1]) if len(sys.argv) > 1 else 40
    print(
        "contrast  left out  recall  false/f  coords    pull  changes    pull  moved/u"
    )
    for contrast in (0.0, 1.0):
        for left_out in (None, *range(len(TIMES_MS))):
            print(one_row(contrast, left_out, seeds), flush=True)


if __name__ == "__main__":
    main()
