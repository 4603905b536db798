"""One effect at a time: how far each moves the pitch, in the stated uncertainty.

Usage: python tests/benchmarks/effects_alone.py [--seeds N] [--job NAME] [--only WORD]
Every effect of the twin is switched on alone, at its size, on top of what the fit
carries. Prints a row an effect: mean and worst deviation in u against the truth, the
bias in u that the effect itself makes, sweeps with a warning, sweeps refused, and why
the row is good: bias within 0.3 u, warned or refused every time, or named in the report
as assumed absent. The bias is the rms over the seeds of the shift against the same seed
without the effect; where the effect leaves less to go by and u grows, the growth in
square that chance alone makes is taken off. What is "said" is in the settings too, not
in the twin alone.
"""

import argparse
import sys
from dataclasses import dataclass, field, replace
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from builders import demo_job, planned_incidence_deg, twin_sweep  # noqa: E402

from pitchsweep.analysis.analysis_errors import AnalysisError  # noqa: E402
from pitchsweep.analysis.measure import measure_pitch  # noqa: E402
from pitchsweep.analysis.records import PitchResult  # noqa: E402

MOST_BIAS = 0.3


@dataclass(frozen=True)
class Case:
    """An effect with the settings that say it, and words that name it if none do."""

    name: str
    effects: dict[str, Any]
    part: dict[str, Any] = field(default_factory=dict)
    stage: dict[str, Any] = field(default_factory=dict)
    screen: dict[str, Any] = field(default_factory=dict)
    named: str = ""


DISC = {"grooves": "spiral", "track_radius_mm": 40.0, "read_side": "bare"}
COVERED = {"read_side": "through-cover", "cover_mm": 0.6, "u_cover_mm": 0.05}
WEDGED = {"cover_thickness_mm": 0.6, "cover_index": 1.58, "cover_wedge_mrad": 0.5}
CASES = (
    Case("nothing else", {}),
    Case(
        "stage harmonics 60, 20, 10, 10 arcsec",
        {"stage_harmonics_arcsec": (60.0, 20.0, 10.0, 10.0)},
    ),
    Case("worm period 5 arcsec", {"worm_arcsec": 5.0}, named="worm period"),
    Case(
        "worm period 5 arcsec, said", {"worm_arcsec": 5.0}, stage={"worm_per_turn": 180}
    ),
    Case("leftover backlash 10 arcsec", {"leftover_backlash_arcsec": 10.0}),
    Case("axis wobble 10 arcsec", {"wobble_arcsec": 10.0}, named="wobble"),
    Case("stage scale 20 ppm, closure said", {"scale_ppm": 20.0}, named="stage scale"),
    Case(
        "stage scale 300 ppm, closure said", {"scale_ppm": 300.0}, named="stage scale"
    ),
    Case(
        "stage scale 20 ppm, no closure",
        {"scale_ppm": 20.0},
        stage={"closure_recorded_on": None, "u_scale_ppm": 1000.0},
    ),
    Case("screen bow 0.2 mm", {"screen_bow_mm": 0.2}),
    Case("lens distortion 0.5 mm", {"distortion_mm": 0.5}),
    Case(
        "lens distortion 0.5 mm, said",
        {"distortion_mm": 0.5},
        screen={"u_lens_distortion_mm": 0.5},
    ),
    Case("camera shift 50 um/h", {"camera_shift_um_per_h": 50.0}),
    Case("camera scale 200 ppm/h", {"camera_scale_ppm_per_h": 200.0}),
    Case("beam pointing 100 urad/h", {"pointing_urad_per_h": 100.0}),
    Case("wavelength drift 2 pm/h", {"wavelength_drift_pm_per_h": 2.0}),
    Case("part radius 10 m", {"part_radius_m": 10.0}),
    Case("cover 0.6 mm", {"cover_thickness_mm": 0.6}),
    Case("cover 0.6 mm, wedge 0.5 mrad", WEDGED, named="wedge of a cover"),
    Case("cover 0.6 mm, wedge 0.5 mrad, said", WEDGED, part=COVERED),
    Case("track radius 40 mm", {"track_radius_mm": 40.0}, named="grooves curved"),
    Case("track radius 40 mm, said", {"track_radius_mm": 40.0}, part=DISC),
    Case("part ends 2.5 mm off", {"part_edge_mm": 2.5}, named="clipping"),
    Case(
        "part ends 2.5 mm off, said",
        {"part_edge_mm": 2.5},
        part={"clear_width_mm": 5.0},
    ),
    Case("ghosts 5 %", {"ghost_fraction": 0.05}),
    Case("missing orders 20 %", {"missing_fraction": 0.2}),
    Case("wild spots 10 %", {"wild_fraction": 0.1}),
)


@dataclass(frozen=True)
class Sweep:
    """What all rows share."""

    job: str
    reading_mm: float
    wide: bool


def job_of(sweep: Sweep, case: Case, effects: dict[str, Any]) -> Any:
    plain = demo_job(sweep.job)
    bench = {
        "stage": plain.bench.stage.model_copy(update=case.stage),
        "screen": plain.bench.screen.model_copy(update=case.screen),
    }
    recipe = {"start_deg": -75.0, "stop_deg": 75.0} if sweep.wide else {}
    return demo_job(
        sweep.job,
        effects=effects,
        part=case.part,
        bench=bench,
        recipe=recipe,
        twin={"spot_reading_mm": sweep.reading_mm},
    )


def measured(job: Any, seed: int) -> tuple[PitchResult | None, float]:
    """Result (None if refused) and truth of one sweep of an hour."""
    steps = len(planned_incidence_deg(job)) * len(job.recipe.mounts_deg)
    sweep = twin_sweep(job, seed, pace_s=3600.0 / steps)
    try:
        result = measure_pitch(sweep.table, bench=job.bench, part=job.part)
    except AnalysisError:
        return None, sweep.truth.pitch_nm
    return result, sweep.truth.pitch_nm


@cache
def without(sweep: Sweep, name: str, seed: int) -> tuple[float, float] | None:
    """Relative deviation and relative u of the sweep without the effect."""
    (case,) = (c for c in CASES if c.name == name)
    if case.part in (DISC, COVERED):  # what they describe is off in the truth too
        case = replace(case, part={})
    result, truth = measured(job_of(sweep, case, {}), seed)
    if result is None:
        return None
    return result.pitch_nm / truth - 1.0, result.u_pitch_nm / truth


def row(sweep: Sweep, case: Case, seeds: range) -> bool:
    """Print one effect's row; whether it is good."""
    pulls, squares, warned, refused, named = [], [], 0, 0, True
    for seed in seeds:
        result, truth = measured(job_of(sweep, case, case.effects), seed)
        if result is None:
            refused += 1
            continue
        u = result.u_pitch_nm / truth
        off = result.pitch_nm / truth - 1.0
        pulls.append(off / u)
        plain = without(sweep, case.name, seed)
        if plain is not None:
            grown = max(0.0, 1.0 - (plain[1] / u) ** 2)
            squares.append(((off - plain[0]) / u) ** 2 - grown)
        warned += bool(result.warnings)
        absent = " ".join(result.assumed_absent)
        named &= bool(case.named) and case.named in absent
    worst = np.max(np.abs(pulls), initial=0.0)
    mean = float(np.mean(pulls)) if pulls else float("nan")
    bias = float(np.sqrt(max(0.0, np.mean(squares)))) if squares else float("nan")
    told = warned + refused == len(seeds)
    why = "told" if told else "named" if named else "NO"
    if bias <= MOST_BIAS:
        why = "within"
    print(
        f"{case.name:38} {mean:+7.2f} {worst:7.2f} {bias:7.2f} {warned:7d} "
        f"{refused:7d}   {why}",
        flush=True,
    )
    return why != "NO"


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--seeds", type=int, default=20)
    parser.add_argument("--job", default="shims-spots")
    parser.add_argument("--reading-mm", type=float, default=0.1)
    parser.add_argument("--wide", action="store_true", help="sweep +-75 degrees")
    parser.add_argument("--only", default="", help="rows with this in their name")
    options = parser.parse_args()
    sweep = Sweep(options.job, options.reading_mm, options.wide)
    print(
        f"{options.job}, {options.seeds} seeds, sweep of one hour, spots read to "
        f"{options.reading_mm:g} mm{', +-75 degrees' if options.wide else ''}"
    )
    print(
        f"{'effect':38} {'mean/u':>7} {'worst':>7} {'bias/u':>7} {'warned':>7} "
        f"{'refused':>7}   bias within {MOST_BIAS:g}, told, or named"
    )
    good = [
        row(sweep, case, range(options.seeds))
        for case in CASES
        if options.only in case.name
    ]
    return 0 if all(good) else 1


if __name__ == "__main__":
    raise SystemExit(main())
