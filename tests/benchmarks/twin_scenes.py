"""Sweeps of the twin with what frames really hold beside orders; false orders, off/u.

Run: python tests/benchmarks/twin_scenes.py [seeds] [scene ...]
(2, all). One mount of 75 steps of 2 degrees through the photons door in this process.
Prints, per scene and seed: spots in the fit, spots in the fit that are no order there
(false), wrong orders, rms pull of the spots before the fit, pitch off in u and u/d, and
whether a beam that keeps coming back was warned of. Seeds are 0..n-1.
"""

import sys
from pathlib import Path
from typing import Any

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from builders import demo_job  # noqa: E402
from photon_sweep import PhotonSweep, photon_sweep  # noqa: E402

from pitchsweep.analysis.analysis_errors import AnalysisError  # noqa: E402
from pitchsweep.analysis.measure import measure_pitch  # noqa: E402
from pitchsweep.analysis.records import PitchResult  # noqa: E402
from pitchsweep.configs.job_model import Job  # noqa: E402
from pitchsweep.drivers.twin.truth import draw_truth  # noqa: E402

SCENES: dict[str, dict[str, Any]] = {
    "plain": {},
    "ghosts": {"ghost_fraction": 0.05},
    "halo": {"halo_fraction": 0.1},
    "smear": {"smear_fraction": 0.02},
    "room-light": {"room_light_step_dn_per_s": 400.0},
    "reflections": {"reflection_fraction": 0.05},
    "lopsided": {"lopsided_fraction": 0.01},
    "drift": {"camera_shift_um_per_h": 50.0},
    "drift-marks": {"camera_shift_um_per_h": 50.0},
}
MARKS_MM = ((-190.0, 55.0), (190.0, 55.0), (-190.0, -55.0), (190.0, -55.0))


def scene_job(scene: str) -> Job:
    """A shipped job with the scene's effects."""
    job = demo_job("track-1600-red", effects=SCENES[scene])
    if scene != "drift-marks":
        return job
    screen = job.bench.screen.model_copy(update={"marks_mm": MARKS_MM})
    bench = job.bench.model_copy(update={"screen": screen})
    return job.model_copy(update={"bench": bench})


def false_and_wrong(sweep: PhotonSweep, result: PitchResult) -> tuple[int, int]:
    """Spots of the fit farther than 2 mm from any order; with a wrong order."""
    false = wrong = 0
    table = result.table
    for step, x, y, order in zip(
        table.step, table.x_mm, table.y_mm, table.order, strict=True
    ):
        seen = sweep.steps[int(step)]
        away = np.hypot(*(seen.place_mm - np.array([x, y])).T)
        if away.size == 0 or away.min() > 2.0:
            false += 1
        elif int(seen.order[away.argmin()]) != int(order):
            wrong += 1
    return false, wrong


def pull_rms(sweep: PhotonSweep) -> float:
    """rms of (found - true) / stated over all spots near an order."""
    pulls = []
    table = sweep.table
    for k, step in enumerate(table.step):
        off = sweep.steps[int(step)].place_mm - (table.x_mm[k], table.y_mm[k])
        away = np.hypot(*off.T)
        if away.size and away.min() < 2.0:
            best = off[away.argmin()]
            pulls += [best[0] / table.ux_mm[k], best[1] / table.uy_mm[k]]
    return float(np.sqrt(np.mean(np.square(pulls))))


def one_row(scene: str, seed: int) -> str:
    """One line of the table."""
    job = scene_job(scene)
    truth = draw_truth(job.bench, job.part, seed)
    incidence = [float(a) for a in np.arange(-74.0, 75.0, 2.0)]
    # Alternate places, so that a drift is not taken for a turn.
    incidence = incidence[0::2] + incidence[1::2][::-1]
    sweep = photon_sweep(job, truth, incidence)
    head = f"{scene:12s} {seed:4d}"
    try:
        result = measure_pitch(
            sweep.table, bench=job.bench, part=job.part, rejected=sweep.rejected
        )
    except AnalysisError as error:
        return f"{head}  {error}"
    false, wrong = false_and_wrong(sweep, result)
    off = (result.pitch_nm - truth.pitch_nm) / result.u_pitch_nm
    warned = sum("unknown beam" in w for w in result.warnings)
    return (
        f"{head} {result.spots_used:6d} {false:6d} {wrong:6d} {pull_rms(sweep):6.2f}"
        f" {off:+7.2f} {result.u_pitch_nm / result.pitch_nm:9.1e} {warned:7d}"
    )


def main() -> None:
    """Print the table."""
    seeds = int(sys.argv[1]) if len(sys.argv) > 1 else 2
    scenes = sys.argv[2:] or list(SCENES)
    print("scene        seed  spots  false  wrong   pull   off/u       u/d  warned")
    for scene in scenes:
        for seed in range(seeds):
            print(one_row(scene, seed), flush=True)


if __name__ == "__main__":
    main()
