"""Pull, coverage and u of lambda/d in every cell: four parts, one, two and four mounts.

Usage: python tests/benchmarks/pitch_cells.py [--seeds 2000] [--processes 2]
Spots read to 0.03 mm over +-75 degrees, stage errors 60, 10, 10, 10 arcsec at 1 to 4
per turn in the truth and in the bench file, screen known to 5 mm and its map wrong by a
smooth 0.5 mm. Laser and temperature count as known: the figures are of lambda/d.
"""

import argparse
import multiprocessing
import os
import sys
import time
from pathlib import Path

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

import numpy as np  # noqa: E402
from benchmarks.method_table import JOBS, wide_job  # noqa: E402
from benchmarks.pitch_pulls import relative_bound, wrong_orders  # noqa: E402
from builders import twin_sweep  # noqa: E402

from pitchsweep.analysis.analysis_errors import AnalysisError  # noqa: E402
from pitchsweep.analysis.measure import measure_pitch  # noqa: E402
from pitchsweep.configs.job_model import Job  # noqa: E402

MOUNTS = ((0.0,), (0.0, 180.0), (0.0, 90.0, 180.0, 270.0))
HARMONICS = (60.0, 10.0, 10.0, 10.0)


def cell_job(name: str) -> Job:
    job = wide_job(name)
    stage = job.bench.stage.model_copy(update={"u_harmonics_arcsec": HARMONICS})
    bench = job.bench.model_copy(update={"stage": stage})
    return job.model_copy(update={"bench": bench})


def one(task: tuple[str, tuple[float, ...], int]) -> tuple[float, ...] | None:
    """Pull, covered, relative u, u over bound, wrong orders; None if refused."""
    name, mounts, seed = task
    job = cell_job(name)
    sweep = twin_sweep(job, seed, mounts_deg=mounts)
    try:
        result = measure_pitch(
            sweep.table, bench=job.bench, part=job.part, advise=False
        )
    except AnalysisError as error:
        print(f"  {name} {len(mounts)} mounts seed {seed}: {error}", file=sys.stderr)
        return None
    off = result.pitch_nm - sweep.truth.pitch_nm
    relative = result.u_pitch_nm / result.pitch_nm
    return (
        off / result.u_pitch_nm,
        float(abs(off) <= result.U_pitch_nm),
        relative,
        relative / relative_bound(job, sweep) if seed < 50 else np.nan,
        wrong_orders(sweep, result.table),
    )


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--seeds", type=int, default=2000)
    parser.add_argument("--processes", type=int, default=2)
    options = parser.parse_args()
    print(
        f"{'part':18} mounts  rms pull  +-3 sd  coverage  u/d       u/bound  wrong"
        "  refused  s"
    )
    with multiprocessing.get_context("spawn").Pool(options.processes) as pool:
        for name in JOBS:
            for mounts in MOUNTS:
                start = time.monotonic()
                tasks = [(name, mounts, seed) for seed in range(options.seeds)]
                rows = pool.map(one, tasks, chunksize=4)
                kept = np.array([row for row in rows if row is not None])
                rms = np.sqrt(np.mean(kept[:, 0] ** 2))
                print(
                    f"{name:18} {len(mounts):6d}  {rms:8.3f}  "
                    f"{3 / np.sqrt(2 * len(kept)):6.3f}  "
                    f"{100 * kept[:, 1].mean():6.1f} %"
                    f"  {kept[:, 2].mean():.2e}  {np.nanmean(kept[:, 3]):7.3f}  "
                    f"{int(kept[:, 4].sum()):5d}  {len(rows) - len(kept):7d}"
                    f"  {time.monotonic() - start:.0f}",
                    flush=True,
                )


if __name__ == "__main__":
    main()
