"""The eight combinations of pitch and laser through the photons door.

Usage: python tests/benchmarks/eight_photons.py [--seeds N]
Each is a whole sweep with frames in processes of its own; prints off/u, u/d, wrong
orders (against the truth's own geometry), wall time.
"""

import argparse
import sys
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from benchmarks.pitch_pulls import EIGHT  # noqa: E402
from builders import demo_job, twin_sweep  # noqa: E402
from whole_sweep import whole_sweep  # noqa: E402

from pitchsweep.configs.job_model import Job  # noqa: E402


def photons_job(name: str) -> Job:
    """A shipped job that records frames instead of spots."""
    return demo_job(name, recipe={"record": "frames"})


def wrong_orders(job: Job, seed: int, orders_csv: str) -> int:
    """Rows whose order is not the one the noiseless truth puts nearest."""
    sweep = twin_sweep(job, seed)
    wrong = 0
    for line in orders_csv.splitlines():
        cells = line.split(",")
        if not cells[0].isdigit() or not cells[4]:
            continue
        stage, order, x = float(cells[1]), int(cells[4]), float(cells[5])
        here = np.abs(sweep.table.stage_deg - stage) < 1e-6
        near = np.abs(sweep.table.x_mm[here] - x)
        if len(near) and near.min() < 3.0:
            wrong += int(sweep.true_order[here][near.argmin()] != order)
    return wrong


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--seeds", type=int, default=2)
    options = parser.parse_args()
    print("job                seed  off/u    u/d      wrong  wall s")
    worst = 0.0
    for name in EIGHT:
        job = photons_job(name)
        for seed in range(options.seeds):
            done = whole_sweep(job, seed)
            if done.exit_code != 0:
                print(f"{name:18} {seed:4d}  exit {done.exit_code}: {done.said}")
                worst = np.inf
                continue
            wrong = wrong_orders(job, seed, done.orders_csv)
            worst = max(worst, abs(done.off_in_u), np.inf if wrong else 0.0)
            print(
                f"{name:18} {seed:4d} {done.off_in_u:+6.2f}  {done.relative_u:.2e} "
                f"{wrong:6d} {done.wall_s:7.1f}",
                flush=True,
            )
    return 0 if worst < 3.0 else 1


if __name__ == "__main__":
    raise SystemExit(main())
