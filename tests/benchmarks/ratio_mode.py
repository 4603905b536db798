"""Ratio to a reference part: a diode whose wavelength is known to half a nanometre.

Usage: python tests/benchmarks/ratio_mode.py [--seeds N]
A reference of certified pitch (relative u 5e-6) is swept before and after the part on
the same bench, four mounts each, spots read to 0.03 mm, +-75 degrees; laser and camera
drift meanwhile. Prints u(d)/d with and without the temperature of the parts, rms pull,
and the wavelength that comes out as a result of its own. The twin gives part and
reference one temperature error, which cancels, while u counts two: the pull against u
without temperature is the one to be near 1.
"""

import argparse
import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

import numpy as np  # noqa: E402
from builders import demo_job, twin_sweep  # noqa: E402

from pitchsweep.acquire.fit_input import FitInput, joined  # noqa: E402
from pitchsweep.analysis.measure import measure_pitch  # noqa: E402
from pitchsweep.analysis.records import PitchResult  # noqa: E402
from pitchsweep.configs.job_model import Job  # noqa: E402
from pitchsweep.configs.part_model import Certified  # noqa: E402

MOUNTS = (0.0, 90.0, 180.0, 270.0)
CERTIFIED_U = 5e-6


def diode_job(nominal_nm: float) -> Job:
    """A part of that nominal pitch before a diode known to 0.5 nm."""
    job = demo_job(
        "shims-spots",
        twin={"spot_reading_mm": 0.03},
        recipe={"start_deg": -75.0, "stop_deg": 75.0, "mounts_deg": MOUNTS},
        effects={"wavelength_drift_pm_per_h": 0.5, "camera_shift_um_per_h": 50.0},
        part={"nominal_pitch_nm": nominal_nm, "part": f"shim-{nominal_nm:g}"},
    )
    red = job.bench.lasers["red"].model_copy(update={"u_wavelength_nm": 0.5})
    bench = job.bench.model_copy(update={"lasers": {"red": red}})
    return job.model_copy(update={"bench": bench})


def one(nominal_nm: float, seed: int) -> tuple[PitchResult, float, float]:
    """Result, true pitch and true vacuum wavelength of before, part, after."""
    part_job, reference_job = diode_job(nominal_nm), diode_job(1000.0)
    rng = np.random.default_rng((seed, 77))
    steps = 4 * 151
    before = twin_sweep(reference_job, seed, pace_s=6.0)
    middle = twin_sweep(part_job, seed, pace_s=6.0, first_mount=4, first_step=steps)
    after = twin_sweep(reference_job, seed, pace_s=6.0, first_step=2 * steps)
    certified = Certified(
        pitch_nm=before.truth.pitch_nm * (1.0 + CERTIFIED_U * rng.standard_normal()),
        u_pitch_nm=CERTIFIED_U * 1000.0,
        certificate="invented",
    )
    reference = reference_job.part.model_copy(update={"certified": certified})
    given = joined(
        [
            FitInput("before", before.table, part_job.bench, reference, 0.95),
            FitInput("part", middle.table, part_job.bench, part_job.part, 0.95),
            FitInput("after", after.table, part_job.bench, reference, 0.95),
        ]
    )
    result = measure_pitch(
        given.table, bench=given.bench, part=given.part, references=given.references
    )
    return result, middle.truth.pitch_nm, middle.truth.vacuum_wavelength_nm["red"]


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--seeds", type=int, default=10)
    options = parser.parse_args()
    print(
        "pitch   u(d)/d   without temperature  rms pull, against the latter  "
        "wavelength off/u, u"
    )
    for nominal_nm in (740.0, 830.0):
        pulls, relative, cold, laser, u_laser = [], [], [], [], []
        cold_pulls = []
        for seed in range(options.seeds):
            result, pitch_nm, wavelength_nm = one(nominal_nm, seed)
            off = result.pitch_nm - pitch_nm
            pulls.append(off / result.u_pitch_nm)
            relative.append(result.u_pitch_nm / result.pitch_nm)
            warm = sum(b.u_nm**2 for b in result.budget if "temperature" in b.source)
            cold.append(np.sqrt(result.u_pitch_nm**2 - warm) / result.pitch_nm)
            cold_pulls.append(off / (cold[-1] * result.pitch_nm))
            (red,) = result.wavelengths
            laser.append((red.vacuum_nm - wavelength_nm) / red.u_nm)
            u_laser.append(red.u_nm)
        print(
            f"{nominal_nm:6g}  {np.mean(relative):.2e} {np.mean(cold):.2e}"
            f"             {np.sqrt(np.mean(np.square(pulls))):7.2f} "
            f"{np.sqrt(np.mean(np.square(cold_pulls))):7.2f}"
            f"                   {np.sqrt(np.mean(np.square(laser))):.2f}, "
            f"{np.mean(u_laser):.4f} nm",
            flush=True,
        )


if __name__ == "__main__":
    main()
