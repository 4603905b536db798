"""What other ways of evaluating the same sweep would give: our own plain estimators.

Usage: python tests/benchmarks/method_table.py [--seeds N]
rms relative error of lambda/d on the simulated bench (spots read to 0.03 mm, +-75
degrees in 1 degree steps, stage errors 60, 10, 10, 10 arcsec at 1 to 4 per turn, screen
map wrong by a smooth 0.5 mm) for: a ruler at normal incidence; the grating equation
step by step with nominal geometry; Littrow angles of +-m where their tracks cross the
beam hole, one mount and the mean of two half a turn apart; the joint fit with one, two
and four mounts.
"""

import argparse
import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

import numpy as np  # noqa: E402
from builders import TwinSweep, demo_job, twin_sweep  # noqa: E402

from pitchsweep.analysis.measure import measure_pitch  # noqa: E402
from pitchsweep.configs.job_model import Job  # noqa: E402

JOBS = ("track-1600-red", "track-740-violet", "track-320-violet", "shims-spots")
L_MM = 250.0


def wide_job(name: str) -> Job:
    """A shipped job, wide, with laser and temperature known: lambda/d alone counts."""
    job = demo_job(name)
    material = job.part.material.model_copy(update={"u_temperature_C": 1e-3})
    lasers = {
        key: laser.model_copy(update={"u_wavelength_nm": 1e-5})
        for key, laser in job.bench.lasers.items()
    }
    return demo_job(
        name,
        twin={"spot_reading_mm": 0.03},
        recipe={"start_deg": -75.0, "stop_deg": 75.0, "step_deg": 1.0},
        part={"u_cover_mm": 0.01, "u_curvature_per_m": 0.001, "material": material},
        bench={"lasers": lasers},
    )


def true_ratio(job: Job, sweep: TwinSweep) -> float:
    laser = job.recipe.lasers[0]
    return sweep.truth.air_wavelength_mm(laser) / sweep.truth.grating_period_mm()


def incidence_rad(sweep: TwinSweep) -> "np.ndarray[tuple[int], np.dtype[np.float64]]":
    turned = sweep.table.stage_deg - sweep.table.mount_deg
    return np.deg2rad((turned + 180.0) % 360.0 - 180.0)


def ruler(sweep: TwinSweep) -> float | None:
    """Half the distance of +m and -m at normal incidence over the nominal distance."""
    here = np.abs(incidence_rad(sweep)) < 1e-6
    for m in (1, 2, 3):
        plus = sweep.table.x_mm[here & (sweep.true_order == m)]
        minus = sweep.table.x_mm[here & (sweep.true_order == -m)]
        if len(plus) and len(minus):
            half = (plus[0] - minus[0]) / 2.0
            return float(np.sin(np.arctan(half / L_MM)) / m)
    return None


def step_by_step(sweep: TwinSweep) -> float | None:
    """Mean of (sin b - sin a) / m over all spots, nominal distance and zero."""
    a, m = incidence_rad(sweep), sweep.true_order
    b = np.arctan(sweep.table.x_mm / L_MM) - a
    use = m != 0
    return float(np.mean((np.sin(b[use]) - np.sin(a[use])) / m[use]))


def littrow(sweep: TwinSweep) -> float | None:
    """Half the angle between the Littrow positions of +m and -m, lowest m seen."""
    a = np.rad2deg(incidence_rad(sweep))
    for m in (1, 2, 3):
        crossings = []
        for order in (m, -m):
            mine = (sweep.true_order == order) & (np.abs(sweep.table.x_mm) < 60.0)
            if mine.sum() < 6:
                break
            # The hole hides the crossing itself: a cubic through both sides.
            curve = np.polyfit(sweep.table.x_mm[mine], a[mine], 3)
            crossings.append(curve[-1])
        if len(crossings) == 2:
            half = np.deg2rad((crossings[1] - crossings[0]) / 2.0)
            return float(2.0 * np.sin(half) / m)
    return None


def joint(job: Job, sweep: TwinSweep) -> float:
    """lambda/d of the joint fit; laser and temperature are known, air nearly."""
    result = measure_pitch(sweep.table, bench=job.bench, part=job.part)
    true_pitch = sweep.truth.pitch_nm
    return true_ratio(job, sweep) * true_pitch / result.pitch_nm


def rms(errors: list[float | None]) -> str:
    good = [e for e in errors if e is not None]
    return f"{np.sqrt(np.mean(np.square(good))):.1e}" if good else "no order"


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--seeds", type=int, default=20)
    options = parser.parse_args()
    print(f"{'method':34}" + "".join(f"{name:>18}" for name in JOBS))
    table: dict[str, list[str]] = {}
    for name in JOBS:
        job = wide_job(name)
        errors: dict[str, list[float | None]] = {}

        def note(
            method: str,
            value: float | None,
            truth: float,
            into: dict[str, list[float | None]] = errors,
        ) -> None:
            into.setdefault(method, []).append(value and value / truth - 1.0)

        for seed in range(options.seeds):
            one = twin_sweep(job, seed, mounts_deg=(0.0,))
            two = twin_sweep(job, seed, mounts_deg=(0.0, 180.0))
            four = twin_sweep(job, seed, mounts_deg=(0.0, 90.0, 180.0, 270.0))
            truth = true_ratio(job, one)
            note("ruler, normal incidence", ruler(one), truth)
            note("grating equation step by step", step_by_step(one), truth)
            note("Littrow of +-m, one mount", littrow(one), truth)
            halves = [littrow(_mount(two, mount)) for mount in (0.0, 180.0)]
            known = [h for h in halves if h is not None]
            mean = float(np.mean(known)) if len(known) == 2 else None
            note("Littrow of +-m, mean of two mounts", mean, truth)
            note("joint fit, one mount", joint(job, one), truth)
            note("joint fit, two mounts", joint(job, two), truth)
            note("joint fit, four mounts", joint(job, four), truth)
        for method, values in errors.items():
            table.setdefault(method, []).append(rms(values))
    for method, cells in table.items():
        print(f"{method:34}" + "".join(f"{cell:>18}" for cell in cells))


def _mount(sweep: TwinSweep, mount_deg: float) -> TwinSweep:
    here = sweep.table.mount_deg == mount_deg
    return TwinSweep(sweep.table.take(here), sweep.truth, sweep.true_order[here])


if __name__ == "__main__":
    main()
