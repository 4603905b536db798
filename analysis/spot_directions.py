"""Spots as directions: how far each is from the zero order, in units of lambda/d.

The zero order obeys the law of reflection whatever the pitch. It is found first, by
that law alone; its track calibrates screen and stage, and with that every other spot
tells its own ``sin b - sin a`` without anything being known of the pitch.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.bench_geometry import landing
from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.part_ray import Local
from pitchsweep.analysis.prediction import FitState, initial_state, local_quantities
from pitchsweep.analysis.records import FloatArray
from pitchsweep.analysis.zero_track import (
    GATE,
    NEAREST,
    Track,
    coarse_problem,
    same_track,
    zero_tracks,
)

BoolArray = NDArray[np.bool_]

GHOST_REACH = 0.045
"""A second surface's copy lies within this many screen distances of its order."""
CLEARLY_BRIGHTER = 3.0


@dataclass(frozen=True)
class Directions:
    """Every spot's place in units of the nominal lambda/d.

    ``ratio`` (N,) is a whole number for an order if the nominal pitch is right, and
    whole multiples of one fundamental anyhow; ``u`` (N,) its standard uncertainty.
    ``step_size`` (N,) is the nominal lambda/d. ``on_track`` (N,): the spot is where
    any order could be, across the grooves and along; ``ghost`` (N,): it lies beside
    a clearly brighter one. ``zero_spots`` lie on the zero order's track, which should
    show at ``zero_expected`` steps; ``zero_cost`` and ``rival_cost`` are the sums of
    squares of that track and of the next best one taken for it; ``zero_u`` is how
    well the bench file alone knows sin b - sin a near the zero order.
    """

    ratio: FloatArray
    u: FloatArray
    step_size: FloatArray
    on_track: BoolArray
    ghost: BoolArray
    coarse: FitProblem
    state: FitState
    covariance: FloatArray
    zero_spots: int
    zero_expected: int
    zero_cost: float
    rival_cost: float
    zero_u: float

    @property
    def is_zero(self) -> BoolArray:
        """The spots that the zero order explains."""
        return self.on_track & (np.abs(self.ratio) < GATE * self.u)


def ghost_suspects(problem: FitProblem) -> BoolArray:
    """Spots (N,) beside a clearly brighter one of their step; none if unknown."""
    table = problem.table
    suspect = np.zeros(len(table), dtype=np.bool_)
    if table.brightness is None:
        return suspect
    reach = GHOST_REACH * problem.base[0, Local.DISTANCE]
    for rows in np.split(problem.by_step, problem.step_starts[1:]):
        x, y, light = table.x_mm[rows], table.y_mm[rows], table.brightness[rows]
        near = np.hypot(x[:, None] - x, y[:, None] - y) < reach
        suspect[rows] = np.any(near & (light > CLEARLY_BRIGHTER * light[:, None]), 1)
    return suspect


def spot_directions(problem: FitProblem, *, with_zero: bool = True) -> Directions:
    """Directions of all spots, seen in the light of the zero order's track.

    ``with_zero`` False leaves the geometry at the bench file's; the uncertainties
    then say so. Never fails for want of a zero order: ``zero_spots`` counts it.
    """
    coarse = coarse_problem(problem)
    ghost = ghost_suspects(problem)
    prior = np.diag(np.array([p.u_prior for p in coarse.parameters]) ** 2)
    state = initial_state(coarse)
    best = Track(state, prior, 0, 0, 0.0)
    rival = np.inf
    nominal, nominal_u, _ = _components(coarse, state, prior)
    near = np.abs(nominal) < NEAREST
    if with_zero:
        tracks = zero_tracks(coarse, nominal, ghost)
        if tracks:
            best = tracks[0]
            others = [t.cost for t in tracks[1:] if not same_track(t, best)]
            rival = min(others, default=np.inf)
    component, u, on_track = _components(coarse, best.state, best.covariance)
    size = problem.base[:, Local.Q]
    return Directions(
        ratio=component / size,
        u=u / size,
        step_size=size,
        on_track=on_track,
        ghost=ghost,
        coarse=coarse,
        state=best.state,
        covariance=best.covariance,
        zero_spots=best.spots,
        zero_expected=best.expected,
        zero_cost=best.cost,
        rival_cost=rival,
        zero_u=float(np.median(nominal_u[near])) if near.any() else np.inf,
    )


def _components(
    coarse: FitProblem, state: FitState, covariance: FloatArray
) -> tuple[FloatArray, FloatArray, BoolArray]:
    """m * lambda/d that puts each spot's x where it is; its u; whether y agrees.

    Newton on the model itself, so that cones, tilts and offsets are all in.
    """
    table = coarse.table
    flat = FitState(state.values, np.zeros(coarse.n_steps))
    local = local_quantities(coarse, np.zeros(len(table), dtype=np.int64), flat)
    in_g = np.sin(local[:, Local.INCIDENCE])
    component = _nominal_component(coarse, local, in_g)
    for _ in range(5):
        local[:, Local.Q] = component
        there = landing(local)
        move = (table.x_mm - there.x_mm) / there.jacobian[:, 0, Local.Q]
        component = component + np.clip(move, -0.1, 0.1)
        component = np.clip(component, -0.9995 - in_g, 0.9995 - in_g)
    local[:, Local.Q] = component
    there = landing(local)
    slope = there.jacobian[:, :, Local.Q]
    by = np.stack(
        [
            there.jacobian[:, :, p.column] * p.coefficient[:, None]
            for p in coarse.parameters
        ],
        axis=2,
    )
    noise = 1.0 / coarse.whitener[:, 0, 0] ** 2
    spread = np.einsum("nip,pq,niq->ni", by, covariance, by, optimize=True)
    u = np.sqrt(spread[:, 0] + noise) / np.abs(slope[:, 0])
    side = (slope[:, 1] * u) ** 2 + spread[:, 1] + noise
    beside_2 = (table.y_mm - there.y_mm) ** 2 / side
    met = np.abs(table.x_mm - there.x_mm) < 0.05
    return component, u, there.valid & met & (beside_2 < GATE**2)


def _nominal_component(
    coarse: FitProblem, local: FloatArray, in_g: FloatArray
) -> FloatArray:
    x, y, z = coarse.table.x_mm, coarse.table.y_mm, local[:, Local.DISTANCE]
    length = np.sqrt(x**2 + y**2 + z**2)
    across = x * np.cos(local[:, Local.INCIDENCE]) - z * in_g
    return np.asarray(across / length - in_g)
