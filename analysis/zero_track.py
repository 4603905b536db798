"""The zero order's track: the one that moves as the law of reflection says."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.fit_parameters import Kind, Source
from pitchsweep.analysis.fit_problem import FitProblem, some_rows
from pitchsweep.analysis.joint_fit import solve_joint_fit
from pitchsweep.analysis.prediction import FitState, initial_state, predict
from pitchsweep.analysis.records import FloatArray

BoolArray = NDArray[np.bool_]

GATE = 4.0
"""A spot further than this many u from an order is not that order."""
NEAREST = 0.12
"""The zero order's nominal abs(sin b - sin a) is below this on any declared bench."""
HALF_WINDOW = 0.025
SETTLED = 1e-3
LOSS_2 = GATE**2
"""What a step costs that shows no spot where the zero order must be."""


def coarse_problem(problem: FitProblem) -> FitProblem:
    """Only pose and seat unknown; the map's error counts as scatter of the spots."""
    kept = tuple(
        p
        for p in problem.parameters
        if p.kind is Kind.LOCAL
        and p.source in (Source.SCREEN, Source.BEAM, Source.SEAT)
    )
    map_u = [p.u_prior for p in problem.parameters if p.source is Source.MAP]
    extra = float(np.sum(np.square(map_u[: len(map_u) // 2]))) if map_u else 0.0
    table = problem.table
    u = np.sqrt(np.maximum(table.ux_mm, table.uy_mm) ** 2 + extra)
    whitener = np.eye(2)[None] / u[:, None, None]
    return replace(problem, parameters=kept, whitener=whitener)


@dataclass(frozen=True)
class Track:
    """One track taken for the zero order: geometry, spots on it, what it costs."""

    state: FitState
    covariance: FloatArray
    spots: int
    expected: int
    cost: float


def same_track(a: Track, b: Track) -> bool:
    """Whether two tracks are one geometry, within three of their u."""
    spread = np.sqrt(np.diag(a.covariance) + np.diag(b.covariance))
    return bool(np.all(np.abs(a.state.values - b.state.values) < 3.0 * spread))


def zero_tracks(
    coarse: FitProblem, component: FloatArray, ghost: BoolArray
) -> list[Track]:
    """Every track that could be the zero order, the most plausible first.

    ``component`` (N,): sin b - sin a of the spots in the bench file's geometry;
    ``ghost`` (N,): spots not to start from.
    """
    near = (np.abs(component) < 1.5 * NEAREST) & ~ghost
    if not near.any():
        return []
    part = some_rows(coarse, near)
    inside = component[near]
    starts = _dense_places(inside[np.abs(inside) < NEAREST])
    tracks = [_follow(part, np.abs(inside - start) < HALF_WINDOW) for start in starts]
    return sorted((t for t in tracks if t.spots), key=lambda track: track.cost)


def _dense_places(values: FloatArray) -> list[float]:
    """Centres of the densest windows, densest first, at most five."""
    centres: list[float] = []
    left = np.sort(values)
    while left.size and len(centres) < 5:
        last = np.searchsorted(left, left + 2.0 * HALF_WINDOW, side="right")
        first = int(np.argmax(last - np.arange(left.size)))
        centre = float(np.median(left[first : last[first]]))
        centres.append(centre)
        left = left[np.abs(left - centre) > 1.5 * HALF_WINDOW]
    return centres


def _follow(part: FitProblem, first: BoolArray) -> Track:
    """Fits the law of reflection to one window and grows along the track."""
    order = np.zeros(len(part.table), dtype=np.int64)
    state, inside = initial_state(part), first
    covariance = np.eye(len(part.parameters))
    for _ in range(4):
        state, covariance = _soft_reflection(part, inside, state)
        off_2 = _distance_2(part, state, covariance)
        grown = off_2 < LOSS_2
        if np.array_equal(grown, inside):
            break
        inside = grown
    if not inside.any():
        return Track(state, covariance, 0, 0, np.inf)
    best = np.full(part.n_steps, LOSS_2)
    np.minimum.at(best, part.step_group, off_2)
    there = predict(part, order, state)
    lost = _on_screen(part, there.x_mm, there.y_mm) & there.valid
    expected = np.zeros(part.n_steps, dtype=np.bool_)
    expected[part.step_group[lost]] = True
    u_prior = np.array([p.u_prior for p in part.parameters])
    cost = float(np.sum((state.values / u_prior) ** 2) + np.sum(best[expected]))
    full = FitState(state.values, np.zeros(0))
    spots = int(inside.sum())
    return Track(full, covariance, spots, int(expected.sum()), cost)


def _on_screen(problem: FitProblem, x_mm: FloatArray, y_mm: FloatArray) -> BoolArray:
    return np.asarray(
        (np.abs(x_mm) < problem.half_width_mm) & (np.abs(y_mm) < problem.half_height_mm)
    )


def _soft_reflection(
    part: FitProblem, inside: BoolArray, state: FitState
) -> tuple[FitState, FloatArray]:
    order = np.zeros(len(part.table), dtype=np.int64)
    weight = inside.astype(np.float64)
    for _ in range(3):
        fit = solve_joint_fit(part, order, weight, state, SETTLED)
        state = fit.state
        off_2 = np.sum(fit.residual**2, axis=1)
        weight = inside / (1.0 + off_2 / 4.0)
    return state, fit.covariance


def _distance_2(
    part: FitProblem, state: FitState, covariance: FloatArray
) -> FloatArray:
    """Squared distances (N,) from the zero order in predicted variances."""
    there = predict(part, np.zeros(len(part.table), dtype=np.int64), state)
    off = np.stack([part.table.x_mm - there.x_mm, part.table.y_mm - there.y_mm], 1)
    spread = np.einsum(
        "nip,pq,njq->nij", there.jacobian, covariance, there.jacobian, optimize=True
    )
    spread += np.eye(2) / part.whitener[:, :1, :1] ** 2
    solved = np.linalg.solve(spread, off[:, :, None])[:, :, 0]
    off_2 = np.sum(off * solved, axis=1)
    return np.asarray(np.where(there.valid, off_2, 1e6))
