"""One effect at a time: how far each moves the pitch, in the stated uncertainty.

Usage: python tests/benchmarks/effects_alone.py [--seeds N] [--job NAME]
Every effect of the twin is switched on alone, at its size, on top of what the fit
carries. Prints a row an effect: mean and worst deviation in u against the truth, the
shift that the effect itself makes (same seed without it), sweeps with a warning, sweeps
refused. The last column says whether every sweep lies within 3 u, warned or refused.
"""

import argparse
import sys
from pathlib import Path
from typing import Any

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from builders import demo_job, planned_incidence_deg, twin_sweep  # noqa: E402

from pitchsweep.analysis.analysis_errors import AnalysisError  # noqa: E402
from pitchsweep.analysis.measure import measure_pitch  # noqa: E402
from pitchsweep.analysis.records import PitchResult  # noqa: E402

EFFECTS: dict[str, dict[str, Any]] = {
    "nothing else": {},
    "stage harmonics 60, 20, 10, 10 arcsec": {
        "stage_harmonics_arcsec": (60.0, 20.0, 10.0, 10.0)
    },
    "worm period 5 arcsec": {"worm_arcsec": 5.0},
    "axis wobble 10 arcsec": {"wobble_arcsec": 10.0},
    "stage scale 20 ppm": {"scale_ppm": 20.0},
    "screen bow 0.2 mm": {"screen_bow_mm": 0.2},
    "lens distortion 0.5 mm": {"distortion_mm": 0.5},
    "camera shift 50 um/h": {"camera_shift_um_per_h": 50.0},
    "camera scale 200 ppm/h": {"camera_scale_ppm_per_h": 200.0},
    "beam pointing 100 urad/h": {"pointing_urad_per_h": 100.0},
    "wavelength drift 2 pm/h": {"wavelength_drift_pm_per_h": 2.0},
    "part radius 10 m": {"part_radius_m": 10.0},
    "cover 0.6 mm": {"cover_thickness_mm": 0.6},
    "ghosts 5 %": {"ghost_fraction": 0.05},
    "missing orders 20 %": {"missing_fraction": 0.2},
    "wild spots 10 %": {"wild_fraction": 0.1},
}


READING: dict[str, Any] = {}


def measured(job: Any, seed: int) -> tuple[PitchResult | None, float]:
    """Result (None if refused) and truth of one sweep of an hour."""
    steps = len(planned_incidence_deg(job)) * len(job.recipe.mounts_deg)
    sweep = twin_sweep(job, seed, pace_s=3600.0 / steps)
    try:
        result = measure_pitch(sweep.table, bench=job.bench, part=job.part)
    except AnalysisError:
        return None, sweep.truth.pitch_nm
    return result, sweep.truth.pitch_nm


def row(name: str, job_name: str, effects: dict[str, Any], seeds: range) -> bool:
    """Print one effect's row; True when no sweep is silently off by over 3 u."""
    pulls, shifts, warned, refused, silent = [], [], 0, 0, 0
    for seed in seeds:
        plain, _ = measured(demo_job(job_name, **READING), seed)
        result, truth = measured(demo_job(job_name, effects=effects, **READING), seed)
        if result is None:
            refused += 1
            continue
        pull = (result.pitch_nm - truth) / result.u_pitch_nm
        pulls.append(pull)
        if plain is not None:
            shifts.append((result.pitch_nm - plain.pitch_nm) / result.u_pitch_nm)
        warned += bool(result.warnings)
        silent += abs(pull) > 3.0 and not result.warnings
    worst = np.max(np.abs(pulls), initial=0.0)
    mean = float(np.mean(pulls)) if pulls else float("nan")
    shift = float(np.sqrt(np.mean(np.square(shifts)))) if shifts else float("nan")
    print(
        f"{name:40} {mean:+7.2f} {worst:7.2f} {shift:7.2f} {warned:7d} {refused:7d}"
        f"   {'yes' if silent == 0 else f'NO ({silent})'}",
        flush=True,
    )
    return silent == 0


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--seeds", type=int, default=20)
    parser.add_argument("--job", default="shims-spots")
    parser.add_argument("--reading-mm", type=float, default=0.1)
    parser.add_argument("--wide", action="store_true", help="sweep +-75 degrees")
    options = parser.parse_args()
    READING["twin"] = {"spot_reading_mm": options.reading_mm}
    if options.wide:
        READING["recipe"] = {"start_deg": -75.0, "stop_deg": 75.0}
    print(f"{options.job}, {options.seeds} seeds, sweep of one hour")
    print(
        f"{'effect':40} {'mean/u':>7} {'worst':>7} {'shift':>7} {'warned':>7} "
        f"{'refused':>7}   within 3 u, warned or refused"
    )
    good = [
        row(name, options.job, effects, range(options.seeds))
        for name, effects in EFFECTS.items()
    ]
    return 0 if all(good) else 1


if __name__ == "__main__":
    raise SystemExit(main())
