"""Sweeps of the twin with what frames really hold beside orders; false orders, pulls.

Run: python tests/benchmarks/twin_scenes.py [seeds] [scene ...]
(10, all). One mount of 51 steps of 3 degrees over an hour, 1280 x 240 pixels, through
the photons door in this process. Prints, per scene: sweeps with a result and refused,
spots in the fit, those that are no order there (false), wrong orders; rms pull of the
spots and the share beyond 2 and 3 u; rms pull of the pitch, its mean and the same
shares; how often u/d came out (median) and how many sweeps warned of an unknown beam.
With ``-v`` a line a sweep too. Seeds are 0..n-1.
"""

import os
import sys
from dataclasses import dataclass
from pathlib import Path

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

import numpy as np  # noqa: E402
from scenes import SCENES, scene_job, scene_sweep, spot_pulls, wrong_spots  # noqa: E402

from pitchsweep.analysis.analysis_errors import AnalysisError  # noqa: E402
from pitchsweep.analysis.measure import measure_pitch  # noqa: E402


@dataclass(frozen=True)
class Row:
    """One sweep's figures."""

    spots: int
    false: int
    wrong: int
    spot_pulls: list[float]
    off_u: float
    relative_u: float
    warned: bool


def one_sweep(scene: str, seed: int) -> Row | str:
    """The figures of one sweep, or why there is no result."""
    job = scene_job(scene)
    sweep, truth = scene_sweep(job, seed)
    try:
        result = measure_pitch(
            sweep.table, bench=job.bench, part=job.part, rejected=sweep.rejected
        )
    except AnalysisError as error:
        return str(error)
    false, wrong = wrong_spots(sweep, result)
    return Row(
        spots=result.spots_used,
        false=false,
        wrong=wrong,
        spot_pulls=spot_pulls(sweep, result),
        off_u=(result.pitch_nm - truth.pitch_nm) / result.u_pitch_nm,
        relative_u=result.u_pitch_nm / result.pitch_nm,
        warned=any("unknown beam" in w for w in result.warnings),
    )


def shares(pulls: list[float]) -> str:
    """rms and the percentage beyond 2 and 3."""
    size = np.abs(np.array(pulls))
    beyond = [100.0 * float(np.mean(size > k)) for k in (2.0, 3.0)]
    rms = float(np.sqrt(np.mean(size**2)))
    return f"{rms:5.2f} {beyond[0]:5.1f} {beyond[1]:5.2f}"


def summary(scene: str, rows: list[Row], refused: int) -> str:
    """One line of the table."""
    off = [row.off_u for row in rows]
    return (
        f"{scene:12s} {len(rows):5d} {refused:7d} {sum(r.spots for r in rows):7d}"
        f" {sum(r.false for r in rows):5d} {sum(r.wrong for r in rows):5d}"
        f"   {shares([p for row in rows for p in row.spot_pulls])}"
        f"   {shares(off)} {np.mean(off):+6.2f}"
        f" {np.median([r.relative_u for r in rows]):8.1e}"
        f" {sum(r.warned for r in rows):6d}"
    )


def main() -> None:
    """Print the table."""
    words = [word for word in sys.argv[1:] if word != "-v"]
    seeds = int(words[0]) if words else 10
    print(
        "scene       sweeps refused   spots false wrong   spots: rms >2u % >3u %"
        "  pitch: rms >2u % >3u %  mean      u/d warned"
    )
    for scene in words[1:] or list(SCENES):
        rows, refused = [], 0
        for seed in range(seeds):
            row = one_sweep(scene, seed)
            if isinstance(row, str):
                refused += 1
                print(f"# {scene} seed {seed}: {row}", flush=True)
                continue
            rows.append(row)
            if "-v" in sys.argv or row.false or row.wrong or abs(row.off_u) > 3.0:
                print(f"# seed {seed}: {summary(scene, [row], 0)}", flush=True)
        if rows:
            print(summary(scene, rows, refused), flush=True)


if __name__ == "__main__":
    main()
