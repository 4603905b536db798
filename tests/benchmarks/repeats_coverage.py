"""Coverage of the pitch where angles are repeated and repeats share their speckle.

Run: python tests/benchmarks/repeats_coverage.py [sweeps a row] [job]
(200, track-1600-red). Every angle of a coarse sweep of +-75 degrees is taken 1, 4 and
10 times; readings have a private error of 0.03 mm and one of 0.1 mm that all repeats of
an angle share, as speckle has. Stage errors are of the size that the bench file states.
Prints rms pull and coverage of the 95 % interval, with the sharing told and kept from
the fit. Seeds are 0..n-1.
"""

import os
import sys
from dataclasses import replace
from pathlib import Path

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

import numpy as np  # noqa: E402
from benchmarks.pitch_cells import cell_job  # noqa: E402
from builders import planned_incidence_deg  # noqa: E402

from pitchsweep.analysis.analysis_errors import AnalysisError  # noqa: E402
from pitchsweep.analysis.measure import measure_pitch  # noqa: E402
from pitchsweep.analysis.records import UNKNOWN_ORDER, OrderTable  # noqa: E402
from pitchsweep.configs.job_model import Job  # noqa: E402
from pitchsweep.drivers.twin.effects import Steps  # noqa: E402
from pitchsweep.drivers.twin.spots_door import SpotSweep, sweep_spots  # noqa: E402
from pitchsweep.drivers.twin.truth import Truth, draw_truth  # noqa: E402

PRIVATE_MM, SHARED_MM = 0.03, 0.1
STEP_DEG = 5.0


def coarse_job(name: str) -> Job:
    """A wide job whose bench file states what the twin does, with few angles."""
    job = cell_job(name)
    assert job.bench.twin is not None
    twin = job.bench.twin.model_copy(update={"spot_reading_mm": PRIVATE_MM})
    recipe = job.recipe.model_copy(update={"step_deg": STEP_DEG})
    bench = job.bench.model_copy(update={"twin": twin})
    return job.model_copy(update={"bench": bench, "recipe": recipe})


def repeated_sweep(job: Job, truth: Truth, seed: int, repeats: int) -> OrderTable:
    """The table of a sweep whose every angle is taken ``repeats`` times."""
    incidence = planned_incidence_deg(job)
    laser = job.recipe.lasers[0]
    parts: list[SpotSweep] = []
    errors: list[np.ndarray] = []
    for mount, mount_deg in enumerate(job.recipe.mounts_deg):
        for repeat in range(repeats):
            first = (mount * repeats + repeat) * incidence.size
            steps = Steps(
                mount=mount,
                mount_deg=mount_deg,
                laser=laser,
                repeat=repeat,
                step=first + np.arange(incidence.size),
                stage_deg=mount_deg + job.bench.stage.direction * incidence,
                planned_s=3.0 * (first + np.arange(incidence.size)),
            )
            sweep = sweep_spots(truth, job.bench, steps)
            parts.append(sweep)
            errors.append(_shared_error(sweep, first, seed, mount))

    def column(name: str) -> np.ndarray:
        return np.concatenate([getattr(part, name) for part in parts])

    moved = np.concatenate(errors)
    n = moved.shape[0]
    stated = np.full(n, float(np.hypot(PRIVATE_MM, SHARED_MM)))
    return OrderTable(
        step=column("step"),
        stage_deg=column("stage_deg"),
        mount_deg=column("mount_deg"),
        laser=np.zeros(n, dtype=np.int64),
        laser_names=(laser,),
        order=np.full(n, UNKNOWN_ORDER, dtype=np.int64),
        x_mm=column("x_mm") + moved[:, 0],
        y_mm=column("y_mm") + moved[:, 1],
        ux_mm=stated,
        uy_mm=stated.copy(),
        cxy_mm2=np.zeros(n),
        brightness=column("brightness"),
        shared_xx_mm2=np.full(n, SHARED_MM**2),
        shared_xy_mm2=np.zeros(n),
        shared_yy_mm2=np.full(n, SHARED_MM**2),
    )


def _shared_error(sweep: SpotSweep, first: int, seed: int, mount: int) -> np.ndarray:
    """The same error (n, 2) for the same mount, angle and order."""
    orders = range(-30, 31)
    count = int(sweep.step.max(initial=first)) - first + 1
    rng = np.random.default_rng([seed, mount, 99])
    table = SHARED_MM * rng.standard_normal((max(count, 1000), len(orders), 2))
    return np.asarray(table[sweep.step - first, np.clip(sweep.order, -30, 30) + 30])


def one_row(job: Job, repeats: int, sweeps: int, told: bool) -> str:
    """One line of the table."""
    pulls, covered, refused = [], [], 0
    for seed in range(sweeps):
        truth = draw_truth(job.bench, job.part, seed)
        table = repeated_sweep(job, truth, seed, repeats)
        if not told:
            table = replace(table, shared_xx_mm2=None)
        try:
            result = measure_pitch(table, bench=job.bench, part=job.part)
        except AnalysisError:
            refused += 1
            continue
        off = result.pitch_nm - truth.pitch_nm
        pulls.append(off / result.u_pitch_nm)
        covered.append(abs(off) <= result.U_pitch_nm)
    rms = float(np.sqrt(np.mean(np.square(pulls))))
    share = 100.0 * float(np.mean(covered))
    spread = 100.0 * (0.95 * 0.05 / max(len(covered), 1)) ** 0.5
    return (
        f"{repeats:7d} {'told' if told else 'kept back':>10s} {len(pulls):7d}"
        f" {rms:9.3f} {share:7.1f} +- {spread:.1f} % {refused:8d}"
    )


def main() -> None:
    """Print the table."""
    sweeps = int(sys.argv[1]) if len(sys.argv) > 1 else 200
    name = sys.argv[2] if len(sys.argv) > 2 else "track-1600-red"
    job = coarse_job(name)
    print("repeats    sharing  sweeps  rms pull  coverage           refused")
    for repeats in (1, 4, 10):
        print(one_row(job, repeats, sweeps, True), flush=True)
    print(one_row(job, 10, max(sweeps // 4, 10), False), flush=True)


if __name__ == "__main__":
    main()
