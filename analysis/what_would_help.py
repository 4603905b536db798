"""What would make the pitch better known, predicted with the fit's own model.

No data are made up: only the angles, orders and places of further readings, and how
the places depend on the unknowns at the fitted state.
"""

import math
from collections.abc import Iterator
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.air_index import AirState
from pitchsweep.analysis.fit_parameters import Source
from pitchsweep.analysis.fit_problem import FitProblem, fit_problem, wrapped_deg
from pitchsweep.analysis.joint_fit import JointFit, one_step
from pitchsweep.analysis.number_text import significant
from pitchsweep.analysis.prediction import FitState, predict
from pitchsweep.analysis.records import FloatArray, IntArray, OrderTable
from pitchsweep.analysis.robust_fit import rescaled
from pitchsweep.analysis.screen_area import counts
from pitchsweep.configs.bench_model import Bench

WORTH_SAYING = 0.9
"""A remedy is told when it brings u below this part of what it is."""
MOST_TOLD = 3
WIDEST_DEG = 75.0
APART_DEG = 20.0
"""Mounts nearer to each other than this are one mount to the stage's errors."""
SHARPER = 2.0
BETTER_KNOWN = 10.0
TURNS = {90.0: "a quarter turn", 180.0: "half a turn"}
MOST_SPOTS = 20_000
"""Beyond this many spots the predictions cost more than they are worth."""
KNOWN_BETTER = {
    Source.PITCH: "a reference certified",
    Source.WAVELENGTH: "a laser wavelength known",
    Source.AIR: "air measured",
    Source.TEMPERATURE: "a part temperature known",
    Source.EXPANSION: "an expansion coefficient known",
    Source.SCREEN: "a screen placed",
    Source.BEAM: "a beam aligned",
    Source.SEAT: "a part seated",
    Source.COVER: "a cover known",
    Source.CURVATURE: "a part curvature known",
    Source.SPIRAL: "a beam diameter known",
    Source.HARMONICS: "a stage calibrated",
    Source.WORM: "a worm error known",
    Source.SCALE: "a stage scale known",
    Source.BACKLASH: "a leftover backlash known",
}
"""Sources that somebody can know better, and how that is said."""


@dataclass(frozen=True)
class Sweep:
    """A finished fit and the bench it was swept on; ``order`` (N,) of its spots."""

    problem: FitProblem
    order: IntArray
    fit: JointFit
    bench: Bench
    air: AirState


@dataclass(frozen=True)
class _Main:
    """The laser with most spots: its mounts, incidences (n,) of the fullest, rising."""

    mounts_deg: FloatArray
    laser: int
    incidence_deg: FloatArray


@dataclass(frozen=True)
class _Extra:
    """Readings to add: words, and stage angles with the mount and laser of them."""

    words: str
    mount_deg: FloatArray
    incidence_deg: FloatArray
    laser: int


def what_would_help(
    sweep: Sweep, pitch_nm: float, extra_nm: float = 0.0
) -> tuple[str, ...]:
    """Sentences on what would lower u most, best first; or that little would.

    ``extra_nm``: u of what the budget adds beside the fit, which stays.
    """
    if len(sweep.problem.table) > MOST_SPOTS:
        return ()
    u_nm = math.hypot(pitch_nm * math.sqrt(float(sweep.fit.covariance[0, 0])), extra_nm)
    options = [
        (words, math.hypot(pitch_nm * math.sqrt(variance), extra_nm))
        for words, variance in _options(sweep)
        if math.isfinite(variance) and variance > 0.0
    ]
    options.sort(key=lambda option: option[1])
    helping = [o for o in options if o[1] < WORTH_SAYING * u_nm][:MOST_TOLD]
    if not helping and options:
        words, best = options[0]
        return (
            f"neither more nor better readings would lower u by a tenth; {words} would "
            f"bring it from {significant(u_nm)} to {significant(best)} nm",
        )
    return tuple(
        f"{words} would bring u from {significant(u_nm)} to {significant(best)} nm"
        for words, best in helping
    )


def _options(sweep: Sweep) -> Iterator[tuple[str, float]]:
    """Words of every remedy with the pitch's relative variance under it."""
    for extra in _extras(sweep):
        yield extra.words, _variance_with(sweep, extra)
    sharper = rescaled(sweep.problem, 1.0 / SHARPER)
    used = sweep.fit.used.astype(np.float64)
    _, covariance = one_step(sharper, sweep.order, sweep.fit.state, used)
    yield "reading the spots twice as well", float(covariance[0, 0])
    yield from _better_known(sweep)


def _better_known(sweep: Sweep) -> Iterator[tuple[str, float]]:
    """Every source of priors that can be known better, ten times better."""
    covariance, parameters = sweep.fit.covariance, sweep.problem.parameters
    for source, words in KNOWN_BETTER.items():
        chosen = [
            i
            for i, p in enumerate(parameters)
            if p.source is source and math.isfinite(p.u_prior)
        ]
        u = np.array([parameters[i].u_prior for i in chosen])
        spread = np.diag(u**2 / (BETTER_KNOWN**2 - 1.0))
        row = covariance[0, chosen]
        taken = np.linalg.solve(covariance[np.ix_(chosen, chosen)] + spread, row)
        yield f"{words} ten times better", float(covariance[0, 0] - row @ taken)


def _extras(sweep: Sweep) -> Iterator[_Extra]:
    main = _main(sweep)
    incidence = main.incidence_deg
    if len(incidence) < 2:
        return
    first = float(main.mounts_deg[0])
    for turn, name in TURNS.items():
        for mount in (first + turn, first - turn):
            if _is_free(sweep, mount, incidence):
                yield _at(f"a mount {name} away", main, np.array([mount]), incidence)
                break
    others = first + np.array([90.0, 180.0, 270.0])
    if all(_is_free(sweep, float(mount), incidence) for mount in others):
        words = "three more mounts, each a quarter turn on,"
        yield _at(words, main, others, incidence)
    step = float(np.median(np.diff(incidence)))
    wider = _wider(incidence, step)
    if len(wider):
        words = f"sweeping out to {WIDEST_DEG:g} degrees"
        yield _at(words, main, main.mounts_deg, wider)
    finer = 0.5 * (incidence[1:] + incidence[:-1])
    yield _at("twice as many steps", main, main.mounts_deg, finer)


def _at(words: str, main: _Main, mounts: FloatArray, incidence: FloatArray) -> _Extra:
    return _Extra(
        words,
        np.repeat(mounts, len(incidence)),
        np.tile(incidence, len(mounts)),
        main.laser,
    )


def _main(sweep: Sweep) -> _Main:
    table, used = sweep.problem.table, sweep.fit.used
    laser = int(np.argmax(np.bincount(table.laser[used])))
    of_laser = used & (table.laser == laser)
    mounts, count = np.unique(table.mount_deg[of_laser], return_counts=True)
    here = of_laser & (table.mount_deg == mounts[int(np.argmax(count))])
    turned = wrapped_deg(table.stage_deg[here] - table.mount_deg[here])
    incidence = np.unique(np.round(sweep.problem.direction * turned, 6))
    return _Main(mounts, laser, incidence)


def _is_free(sweep: Sweep, mount_deg: float, incidence: FloatArray) -> bool:
    """Whether the stage reaches a mount and none is near it already."""
    apart = wrapped_deg(sweep.problem.table.mount_deg - mount_deg)
    stage, turned = sweep.bench.stage, sweep.problem.direction * incidence
    reached = [
        stage.travel_min_deg <= at + float(turned.min())
        and at + float(turned.max()) <= stage.travel_max_deg
        for at in mount_deg % 360.0 + np.array([-360.0, 0.0, 360.0])
    ]
    return bool(np.all(np.abs(apart) > APART_DEG)) and any(reached)


def _wider(incidence: FloatArray, step: float) -> FloatArray:
    low, high = float(incidence[0]), float(incidence[-1])
    below = np.arange(low - step, -WIDEST_DEG - 1e-9, -step)
    above = np.arange(high + step, WIDEST_DEG + 1e-9, step)
    return np.concatenate([below, above])


def _variance_with(sweep: Sweep, extra: _Extra) -> float:
    """Relative variance of the pitch with the extra readings beside the real ones."""
    problem, fit = sweep.problem, sweep.fit
    more, more_order = _readings(sweep, extra)
    table = _stacked(problem.table, more)
    order = np.concatenate([sweep.order, more_order])
    wider = fit_problem(table, sweep.bench, problem.parts, sweep.air, problem.jumps)
    known = {
        p.name: v for p, v in zip(problem.parameters, fit.state.values, strict=True)
    }
    values = np.array([known.get(p.name, 0.0) for p in wider.parameters])
    state = FitState(values, np.zeros(wider.n_steps))
    seen = predict(wider, order, state)
    weight = np.concatenate([fit.used, np.zeros(len(more), dtype=np.bool_)])
    new = np.arange(len(table)) >= len(problem.table)
    there = counts(sweep.bench, seen.x_mm, seen.y_mm) & seen.valid
    weight |= new & there
    _, covariance = one_step(wider, order, state, weight.astype(np.float64))
    return float(covariance[0, 0])


def _readings(sweep: Sweep, extra: _Extra) -> tuple[OrderTable, IntArray]:
    """Rows for every order at every extra angle, in a run of their own."""
    table, used = sweep.problem.table, sweep.fit.used
    orders = np.unique(sweep.order[used & (table.laser == extra.laser)])
    count = len(extra.incidence_deg)
    step = np.repeat(np.arange(count), len(orders))
    rows: dict[str, NDArray[Any]] = {
        name: np.zeros(len(step)) for name in _present(table)
    }
    rows["step"] = step + int(table.step.max()) + 1
    rows["mount_deg"] = extra.mount_deg[step]
    turned = sweep.problem.direction * extra.incidence_deg[step]
    rows["stage_deg"] = rows["mount_deg"] % 360.0 + turned
    rows["laser"] = np.full(len(step), extra.laser)
    rows["ux_mm"] = np.full(len(step), np.median(table.ux_mm[used]))
    rows["uy_mm"] = np.full(len(step), np.median(table.uy_mm[used]))
    if table.run is not None:
        rows["run"] = np.full(len(step), int(table.run.max()) + 1)
    if table.time_s is not None:
        rows["time_s"] = step * 1.0
    columns: dict[str, Any] = {
        name: row.astype(getattr(table, name).dtype) for name, row in rows.items()
    }
    order = np.tile(orders, count)
    return replace(table, **columns), order


def _present(table: OrderTable) -> list[str]:
    return [n for n, v in table.__dict__.items() if isinstance(v, np.ndarray)]


def _stacked(table: OrderTable, more: OrderTable) -> OrderTable:
    columns: dict[str, Any] = {
        name: np.concatenate([getattr(table, name), getattr(more, name)])
        for name in _present(table)
    }
    return replace(table, **columns)
