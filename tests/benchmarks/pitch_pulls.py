"""Pull, coverage and u of the pitch over many spot-level sweeps of the twin.

Usage: python tests/benchmarks/pitch_pulls.py [--seeds N] [--job NAME ...]
Prints a row a job: seeds, refused, rms pull with its expected scatter, coverage of the
95 % interval, mean u/d, mean u over the Fisher bound of the plan, wrong orders.
"""

import argparse
import sys
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from builders import TwinSweep, demo_job, twin_sweep  # noqa: E402

from pitchsweep.analysis.air_index import AirState  # noqa: E402
from pitchsweep.analysis.analysis_errors import AnalysisError  # noqa: E402
from pitchsweep.analysis.fit_problem import fit_problem  # noqa: E402
from pitchsweep.analysis.joint_fit import solve_joint_fit  # noqa: E402
from pitchsweep.analysis.measure import measure_pitch  # noqa: E402
from pitchsweep.configs.job_model import Job  # noqa: E402

EIGHT = [
    f"track-{pitch}-{colour}"
    for pitch in (1600, 740, 320)
    for colour in ("red", "green", "violet")
    if (pitch, colour) != (320, "red")
]


@dataclass(frozen=True)
class PullRow:
    """What one job's sweeps showed."""

    job: str
    pulls: "np.ndarray[tuple[int], np.dtype[np.float64]]"
    covered: float
    relative_u: float
    over_bound: float
    wrong_orders: int
    refused: int

    @property
    def rms(self) -> float:
        return float(np.sqrt(np.mean(self.pulls**2)))


def relative_bound(job: Job, sweep: TwinSweep) -> float:
    """Fisher bound of u(lambda/d) with the true orders and every spot told."""
    keep = np.abs(sweep.true_order) < 1000
    table = sweep.table.take(keep)
    air = job.bench.air
    problem = fit_problem(
        replace(table, order=sweep.true_order[keep]),
        job.bench,
        (job.part,),
        AirState(air.temperature_C, air.pressure_hPa, air.humidity_percent),
    )
    fit = solve_joint_fit(problem, sweep.true_order[keep], np.ones(len(table)))
    return float(np.sqrt(fit.covariance[0, 0]))


def pulls_of(name: str, job: Job, seeds: range) -> PullRow:
    """Run ``measure_pitch`` on a sweep a seed."""
    pulls, covered, relative, over, wrong, refused = [], [], [], [], 0, 0
    for seed in seeds:
        sweep = twin_sweep(job, seed)
        try:
            result = measure_pitch(sweep.table, bench=job.bench, part=job.part)
        except AnalysisError as error:
            refused += 1
            print(f"  {name} seed {seed}: {error}", file=sys.stderr)
            continue
        off = result.pitch_nm - sweep.truth.pitch_nm
        pulls.append(off / result.u_pitch_nm)
        covered.append(abs(off) <= result.U_pitch_nm)
        relative.append(result.u_pitch_nm / result.pitch_nm)
        over.append(relative[-1] / relative_bound(job, sweep))
        wrong += wrong_orders(sweep, result.table)
    return PullRow(
        name,
        np.array(pulls),
        float(np.mean(covered)),
        float(np.mean(relative)),
        float(np.mean(over)),
        wrong,
        refused,
    )


def wrong_orders(sweep: TwinSweep, used) -> int:  # type: ignore[no-untyped-def]
    """Spots of the fit whose order is not the true one."""
    truth = {
        (int(s), float(x)): int(m)
        for s, x, m in zip(
            sweep.table.step, sweep.table.x_mm, sweep.true_order, strict=True
        )
    }
    return sum(
        truth[(int(s), float(x))] != int(m)
        for s, x, m in zip(used.step, used.x_mm, used.order, strict=True)
    )


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--seeds", type=int, default=200)
    parser.add_argument("--job", nargs="*", default=EIGHT)
    options = parser.parse_args()
    print(
        f"{'job':18} rms pull  expected      coverage  u/d      u/bound wrong refused"
    )
    everything = []
    for name in options.job:
        row = pulls_of(name, demo_job(name), range(options.seeds))
        everything.append(row.pulls)
        print(
            f"{name:18} {row.rms:8.3f}  1+-{3 / np.sqrt(2 * len(row.pulls)):.3f}    "
            f"{100 * row.covered:6.1f} %  {row.relative_u:.2e} {row.over_bound:7.3f} "
            f"{row.wrong_orders:5d} {row.refused:5d}",
            flush=True,
        )
    pooled = np.concatenate(everything)
    print(
        f"pooled rms pull {np.sqrt(np.mean(pooled**2)):.3f}, "
        f"expected 1+-{3 / np.sqrt(2 * len(pooled)):.3f}"
    )


if __name__ == "__main__":
    main()
