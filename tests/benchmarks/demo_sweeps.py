"""The demo as its user runs it, over many twin seeds: does it hit, and how well.

Usage: python tests/benchmarks/demo_sweeps.py [--seeds N] [--first K] [--job NAME]
Each seed is one `pitchsweep sweep` in an empty folder, in processes of its own. Prints
the deviation from the truth in u, u/d, u over the Fisher bound of the plan (every order
that the plan puts on the screen, read to the bench file's reading_u_mm), the wall time,
and whether `fit RUN` gives the same numbers after the twin's folder is deleted.
"""

import argparse
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from builders import demo_job, twin_sweep  # noqa: E402
from whole_sweep import whole_sweep  # noqa: E402

from pitchsweep.analysis.air_index import AirState  # noqa: E402
from pitchsweep.analysis.fit_problem import fit_problem  # noqa: E402
from pitchsweep.analysis.joint_fit import solve_joint_fit  # noqa: E402


def plan_bound(job_name: str, seed: int) -> float:
    """Relative u of the pitch that the plan allows at best, material included."""
    job = demo_job(job_name)
    sweep = twin_sweep(job, seed)
    n = len(sweep.table)
    reading = np.full(n, job.bench.reading_u_mm)
    table = replace(sweep.table, ux_mm=reading, uy_mm=reading, order=sweep.true_order)
    air = job.bench.air
    state = AirState(air.temperature_C, air.pressure_hPa, air.humidity_percent)
    problem = fit_problem(table, job.bench, (job.part,), state)
    fit = solve_joint_fit(problem, sweep.true_order, np.ones(n))
    material = job.part.material
    expansion = material.expansion_per_K * material.u_temperature_C
    return float(np.sqrt(fit.covariance[0, 0] + expansion**2))


def one_seed(job_name: str, seed: int) -> tuple[float, float, float, float, bool]:
    done = whole_sweep(job_name, seed, refit=True)
    if done.exit_code != 0:
        raise SystemExit(f"seed {seed}: exit {done.exit_code}: {done.said}")
    over = done.relative_u / plan_bound(job_name, seed)
    same = done.refit == done.result
    return done.off_in_u, done.relative_u, over, done.wall_s, same


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--seeds", type=int, default=10)
    parser.add_argument("--first", type=int, default=1000)
    parser.add_argument("--job", default="shims")
    options = parser.parse_args()
    print("seed   off/u    u/d       u/bound   wall s   same after fit RUN")
    rows = []
    for seed in range(options.first, options.first + options.seeds):
        row = one_seed(options.job, seed)
        rows.append(row)
        print(
            f"{seed:5d} {row[0]:+7.2f}  {row[1]:.2e} {row[2]:8.2f} {row[3]:8.1f}"
            f"   {'yes' if row[4] else 'NO'}",
            flush=True,
        )
    pulls = np.array([row[0] for row in rows])
    print(
        f"rms {np.sqrt(np.mean(pulls**2)):.2f}, worst {np.abs(pulls).max():.2f}, "
        f"u/d up to {max(r[1] for r in rows):.2e}, u/bound up to "
        f"{max(r[2] for r in rows):.2f}, wall up to {max(r[3] for r in rows):.1f} s"
    )
    good = np.abs(pulls).max() < 3.0 and all(row[4] for row in rows)
    return 0 if good else 1


if __name__ == "__main__":
    raise SystemExit(main())
