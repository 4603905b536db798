"""Orders on random benches and pitches with nothing said of the pitch.

Usage: python tests/benchmarks/orders_without_hints.py [--seeds N] [--from SEED]
Every seed draws a pitch of 350 to 2500 nm, a laser, screen distance 150 to 400 mm,
screen width, angle step, everything the bench file does not know, 10 % wild spots, 15 %
missing ones and ghosts. The part file says 740 nm throughout. Right: the pitch after
the joint fit is within 0.1 % and at most one spot in a hundred has another order than
the true one. Prints right, refused, wrong, the refusals and the time a sweep.
"""

import argparse
import sys
import time
from collections import Counter
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from unhinted import judged, random_sweep  # noqa: E402


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--seeds", type=int, default=1000)
    parser.add_argument("--from", type=int, default=0, dest="first")
    options = parser.parse_args()
    counts: Counter[str] = Counter()
    seconds = []
    for seed in range(options.first, options.first + options.seeds):
        case = random_sweep(seed)
        start = time.process_time()
        verdict, text = judged(case)
        seconds.append(time.process_time() - start)
        counts[verdict] += 1
        if verdict != "right":
            pitch_nm = case.sweep.truth.pitch_nm
            print(f"  seed {seed} ({pitch_nm:.1f} nm) {verdict}: {text}", flush=True)
    total = sum(counts.values())
    print(
        f"sweeps {total}: right {counts['right']}, refused {counts['refused']} "
        f"({100 * counts['refused'] / total:.1f} %), wrong {counts['wrong']}"
    )
    mean, worst = np.mean(seconds), np.max(seconds)
    print(f"processor seconds a sweep: mean {mean:.2f}, worst {worst:.2f}")


if __name__ == "__main__":
    main()
