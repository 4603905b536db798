"""Random benches and pitches for sweeps without a hint of the pitch."""

from dataclasses import dataclass, replace

import numpy as np
from builders import TwinSweep, demo_job, twin_sweep
from numpy.typing import NDArray

from pitchsweep.analysis.air_index import AirState
from pitchsweep.analysis.analysis_errors import NoResult
from pitchsweep.analysis.fit_problem import fit_problem
from pitchsweep.analysis.pitch_hint import fit_with_hint
from pitchsweep.analysis.records import IntArray, OrderTable
from pitchsweep.analysis.unhinted_orders import orders_without_hint
from pitchsweep.configs.job_model import Job

COLOURS = ("red", "green", "violet")
FILE_PITCH_NM = 740.0
ROUGH = {
    "wild_fraction": 0.1,
    "missing_fraction": 0.15,
    "ghost_fraction": 0.03,
}


@dataclass(frozen=True)
class Unhinted:
    """A sweep with the job as the analysis gets it: its nominal pitch is worthless."""

    job: Job
    sweep: TwinSweep


def random_sweep(
    seed: int, effects: dict[str, float] | None = None, step_deg: float | None = None
) -> Unhinted:
    """A bench, a laser and a pitch drawn from ``seed``; screens 0.8 to 2 D wide."""
    random = np.random.default_rng([20, seed])
    colour = COLOURS[int(random.integers(3))]
    distance = float(random.uniform(150.0, 400.0))
    pitch = float(np.exp(random.uniform(np.log(350.0), np.log(2500.0))))
    step = step_deg or float(random.choice([1.5, 2.0, 3.0, 4.0]))
    base = demo_job(f"track-740-{colour}")
    screen = base.bench.screen.model_copy(
        update={
            "distance_mm": distance,
            "width_mm": distance * float(random.uniform(1.0, 2.0)),
        }
    )
    job = demo_job(
        f"track-740-{colour}",
        bench={"screen": screen},
        part={"nominal_pitch_nm": pitch},
        recipe={"step_deg": step, **_span(step)},
        effects=ROUGH if effects is None else effects,
    )
    sweep = twin_sweep(job, seed)
    blind = job.part.model_copy(
        update={"nominal_pitch_nm": FILE_PITCH_NM, "tolerance": None}
    )
    return Unhinted(job.model_copy(update={"part": blind}), sweep)


def _span(step_deg: float) -> dict[str, float]:
    reach = step_deg * np.floor(75.0 / step_deg)
    return {"start_deg": -float(reach), "stop_deg": float(reach)}


def air_of(job: Job) -> AirState:
    """The bench file's air."""
    air = job.bench.air
    return AirState(air.temperature_C, air.pressure_hPa, air.humidity_percent)


def only_orders(sweep: TwinSweep, keep: NDArray[np.bool_]) -> TwinSweep:
    """The sweep with some of its rows."""
    return replace(
        sweep, table=sweep.table.take(keep), true_order=sweep.true_order[keep]
    )


def overlaid(first: OrderTable, second: OrderTable) -> OrderTable:
    """Spots of two gratings seen in one sweep (same steps)."""
    columns = {
        name: np.concatenate([value, getattr(second, name)])
        if isinstance(value, np.ndarray)
        else value
        for name, value in first.__dict__.items()
    }
    return OrderTable(**columns)


def judged(case: Unhinted, *, trust_nominal: bool = False) -> tuple[str, str]:
    """``right``, ``refused`` or ``wrong`` for a sweep fitted without a hint, and why.

    Wrong: a pitch off by more than 0.1 %, or more than one spot in a hundred with an
    order that is not the true one, after the joint fit.
    """
    job, sweep = case.job, case.sweep
    problem = fit_problem(sweep.table, job.bench, (job.part,), air_of(job))
    try:
        fitted = fit_with_hint(
            problem, bench=job.bench, air=air_of(job), trust_nominal=trust_nominal
        )
    except NoResult as refusal:
        return "refused", str(refusal).splitlines()[0]
    clean = fitted.clean
    ratio = float(np.exp(clean.fit.state.values[0]))
    pitch_nm = fitted.problem.parts[0].nominal_pitch_nm * ratio
    return _verdict(sweep, pitch_nm, clean.order, clean.used)


def judged_before_fit(case: Unhinted) -> tuple[str, str]:
    """The same for pitch and orders as found, before the joint fit."""
    job, sweep = case.job, case.sweep
    try:
        found = orders_without_hint(
            sweep.table,
            bench=job.bench,
            parts=(job.part,),
            air=air_of(job),
            nominal_counts=False,
        )
    except NoResult as refusal:
        return "refused", str(refusal).splitlines()[0]
    return _verdict(
        sweep, found.pitch_nm, found.first.order, found.first.assigned, 5e-3
    )


def _verdict(
    sweep: TwinSweep,
    pitch_nm: float,
    order: IntArray,
    used: NDArray[np.bool_],
    nearest: float = 1e-3,
) -> tuple[str, str]:
    off = pitch_nm / sweep.truth.pitch_nm - 1.0
    spots = used & (np.abs(sweep.true_order) < 1000)
    other = float(np.mean(order[spots] != sweep.true_order[spots]))
    if abs(off) > nearest or other > 0.01:
        return "wrong", f"pitch off by {off:.2e}, {100 * other:.1f} % other orders"
    return "right", f"pitch off by {off:.1e}"
