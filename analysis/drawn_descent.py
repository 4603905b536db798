"""Many draws of a joint fit's inputs taken down to their minima side by side.

The first step is the linear one from the undrawn minimum, the second uses the
information of the place where it led; later ones keep that while they shrink. All
arrays lead with the B draws.
"""

import math
from dataclasses import dataclass, replace

import numpy as np

from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.joint_fit import JointFit
from pitchsweep.analysis.prediction import FitState, predict
from pitchsweep.analysis.records import FloatArray, IntArray

MOST_STEPS = 12
KEPT = (1, 2)
"""Steps after the linear one that keep the information of the step before."""
ENOUGH = 0.02
"""A draw is at its minimum when its step moved no pitch by more than this part of u:
steps shrink tenfold or faster, so that what is left is far below a tolerance."""


@dataclass(frozen=True)
class DrawnInputs:
    """Inputs counted from their estimates, each in its own u."""

    readings: FloatArray  # (B, N, 2), whitened
    priors: FloatArray  # (B, P)
    steps: FloatArray  # (B, S)


@dataclass(frozen=True)
class _Unknowns:
    """Parameters (B, P) and step errors (B, S): places, moves, or slopes by them."""

    values: FloatArray
    steps: FloatArray


@dataclass(frozen=True)
class _Near:
    """The equations at the places of the draws, whitened and weighted.

    ``slope`` (B, 2N, P), ``by_step`` (B, N, 2), ``pull`` (B, N, 2) the residuals,
    ``weight`` (B, N, 1).
    """

    slope: FloatArray
    by_step: FloatArray
    pull: FloatArray
    weight: FloatArray


@dataclass(frozen=True)
class _Solver:
    """Information: inverse (B, P, P), border (B, S, P), diagonal (B, S)."""

    inverse: FloatArray
    border: FloatArray
    diagonal: FloatArray

    def move(self, right: _Unknowns) -> _Unknowns:
        """The Gauss-Newton move for slopes of half the sum of squares."""
        scaled = right.steps / self.diagonal
        reduced = right.values - np.matmul(scaled[:, None], self.border)[:, 0]
        move = np.matmul(self.inverse, reduced[:, :, None])[:, :, 0]
        taken = np.matmul(self.border, move[:, :, None])[:, :, 0]
        return _Unknowns(move, scaled - taken / self.diagonal)


@dataclass(frozen=True)
class Minimum:
    """The undrawn minimum from which all draws start; made by ``minimum_of``.

    ``prior`` (P,) are the weights of the priors; ``near`` and ``solver`` hold the
    equations there (B = 1).
    """

    problem: FitProblem
    order: IntArray
    fit: JointFit
    prior: FloatArray
    near: _Near
    solver: _Solver


def minimum_of(problem: FitProblem, order: IntArray, fit: JointFit) -> Minimum:
    """The minimum of a fit, ready for draws."""
    u = np.array([parameter.u_prior for parameter in problem.parameters])
    prior = np.where(np.isfinite(u), 1.0 / u**2, 0.0)
    there = _Unknowns(fit.state.values[None], fit.state.step_error_rad[None])
    near = _near(problem, side_by_side(problem, 1), order, fit, there)
    return Minimum(problem, order, fit, prior, near, _solver(problem, prior, near))


def first_order(at: Minimum) -> DrawnInputs:
    """Derivatives of parameter 0 by every input, a unit of its own u; B = 1."""
    row, pull = at.fit.covariance[0], at.fit.step_pull[0]
    readings = (at.near.slope @ row).reshape(at.near.by_step.shape)
    by_step = at.near.by_step * pull[at.problem.step_group][:, None]
    return DrawnInputs(
        readings=readings + by_step,
        priors=(row * np.sqrt(at.prior))[None],
        steps=(pull / at.problem.u_step_rad)[None],
    )


def side_by_side(problem: FitProblem, count: int) -> FitProblem:
    """``count`` copies of the problem's spots, each copy with steps of its own."""
    shift = np.repeat(np.arange(count) * problem.n_steps, len(problem.table))
    return replace(
        problem,
        parameters=tuple(
            replace(p, coefficient=np.tile(p.coefficient, count))
            for p in problem.parameters
        ),
        base=np.tile(problem.base, (count, 1)),
        step_group=np.tile(problem.step_group, count) + shift,
        n_steps=problem.n_steps * count,
    )


def drawn_minima(at: Minimum, copies: FitProblem, drawn: DrawnInputs) -> FloatArray:
    """Parameter 0 (B,) at the minimum of every draw; NaN where none was reached.

    ``copies`` is the problem ``side_by_side`` B times.
    """
    problem, u = at.problem, np.where(at.prior > 0.0, at.prior, np.inf) ** -0.5
    means = _Unknowns(drawn.priors * u, drawn.steps * problem.u_step_rad)
    start = _Unknowns(at.fit.state.values[None], at.fit.state.step_error_rad[None])
    enough = ENOUGH * math.sqrt(float(at.fit.covariance[0, 0]))
    # Undrawn inputs balance at the minimum: only what is drawn pulls there.
    solver = at.solver
    move = solver.move(_slopes(at, at.near, drawn.readings, means))
    place = _Unknowns(start.values + move.values, start.steps + move.steps)
    left = np.abs(move.values[:, 0])
    with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
        for turn in range(MOST_STEPS):
            near = _near(problem, copies, at.order, at.fit, place)
            if turn not in KEPT:
                solver = _solver(problem, at.prior, near)
            away = _Unknowns(means.values - place.values, means.steps - place.steps)
            pull = near.pull + drawn.readings * near.weight
            move = solver.move(_slopes(at, near, pull, away))
            place = _Unknowns(place.values + move.values, place.steps + move.steps)
            left = np.abs(move.values[:, 0])
            if bool(np.all(left < enough)):
                break
    return np.where(left < enough, place.values[:, 0], np.nan)


def _slopes(at: Minimum, near: _Near, pull: FloatArray, away: _Unknowns) -> _Unknowns:
    """Slopes of half the sum of squares; ``away`` is prior means minus unknowns."""
    values = np.matmul(pull.reshape(len(pull), 1, -1), near.slope)[:, 0]
    steps = _by_step(at.problem, np.sum(near.by_step * pull, axis=2))
    return _Unknowns(
        values + at.prior * away.values, steps + away.steps / at.problem.u_step_rad**2
    )


def _by_step(problem: FitProblem, rows: FloatArray) -> FloatArray:
    """Sums (B, S, ...) over the spots (B, N, ...) of each step."""
    sums = np.add.reduceat(rows[:, problem.by_step], problem.step_starts, axis=1)
    return np.asarray(sums)


def _near(
    problem: FitProblem,
    copies: FitProblem,
    order: IntArray,
    fit: JointFit,
    place: _Unknowns,
) -> _Near:
    table, (b, p) = problem.table, place.values.shape
    n = len(table)
    # Every spot gets the values of its own draw: (P, B * N).
    state = FitState(np.repeat(place.values.T, n, axis=1), place.steps.reshape(-1))
    there = predict(copies, np.tile(order, b), state)
    x, y = there.x_mm.reshape(b, n), there.y_mm.reshape(b, n)
    off = np.stack([table.x_mm - x, table.y_mm - y], axis=2)
    weight = (fit.used & there.valid.reshape(b, n)).astype(np.float64)
    whitener = problem.whitener * weight[:, :, None, None]
    slope = np.matmul(whitener, there.jacobian.reshape(b, n, 2, p))
    by_step = np.matmul(whitener, there.by_step.reshape(b, n, 2, 1))[..., 0]
    return _Near(
        slope=slope.reshape(b, 2 * n, p),
        by_step=by_step,
        pull=np.matmul(whitener, off[..., None])[..., 0],
        weight=weight[:, :, None],
    )


def _solver(problem: FitProblem, prior: FloatArray, near: _Near) -> _Solver:
    b, n = near.by_step.shape[:2]
    slope = near.slope.reshape(b, n, 2, -1)
    both = np.matmul(near.by_step[:, :, None], slope)[:, :, 0]
    border = _by_step(problem, both)
    diagonal = _by_step(problem, np.sum(near.by_step**2, axis=2))
    diagonal += 1.0 / problem.u_step_rad**2
    information = np.matmul(near.slope.transpose(0, 2, 1), near.slope)
    information += np.diag(prior)
    taken = np.matmul(border.transpose(0, 2, 1), border / diagonal[:, :, None])
    return _Solver(_inverses(information - taken), border, diagonal)


def _inverses(information: FloatArray) -> FloatArray:
    """Inverses (B, P, P), scaled to unit diagonal first; NaN where not finite."""
    scale = 1.0 / np.sqrt(np.einsum("bii->bi", information))
    outer = scale[:, :, None] * scale[:, None]
    scaled = information * outer
    lost = ~np.isfinite(scaled).all(axis=(1, 2))
    scaled[lost] = np.eye(information.shape[1])
    found = np.linalg.inv(scaled) * outer
    found[lost] = np.nan
    return np.asarray(found)
