"""The joint fit's normal equations at a state, gathered a block of steps at a time.

The matrix is a small dense block (the parameters) bordered by one diagonal entry a step
(its angle error); the steps are eliminated by the Schur complement. Blocks are small
enough for everything of one to stay in the processor's cache, so that time is linear in
the number of steps however many there are.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.damped_descent import damped_solution
from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.prediction import FitState, predict, residuals
from pitchsweep.analysis.records import FloatArray, IntArray

BLOCK_SPOTS = 1500


@dataclass(frozen=True)
class Block:
    """Some whole steps: ``rows`` (n,) of the spots, steps ``first`` to ``last`` - 1."""

    rows: IntArray
    first: int
    last: int
    problem: FitProblem
    order: IntArray
    weight: FloatArray


@dataclass(frozen=True)
class Blocks:
    """A problem with its orders and weights (N,), cut into blocks."""

    problem: FitProblem
    weight: FloatArray
    prior: FloatArray  # (P,) weights of the priors
    parts: tuple[Block, ...]


@dataclass(frozen=True)
class Normal:
    """The bordered normal equations at a state, steps still in.

    ``x_mm``, ``y_mm`` (N,) are where the model puts the spots, ``residual`` (N, 2) what
    is left, whitened and unweighted, ``used`` (N,) the spots that are in the equations.
    """

    state: FitState
    dense: FloatArray  # (P, P) without priors
    border: FloatArray  # (P, S)
    diagonal: FloatArray  # (S,) with the step prior
    right: FloatArray  # (P,)
    right_step: FloatArray  # (S,)
    x_mm: FloatArray
    y_mm: FloatArray
    residual: FloatArray
    used: NDArray[np.bool_]
    prior_cost: float  # of priors and step errors, in the sum of squares

    def cost(self, weight: FloatArray) -> float:
        """Sum of squares with priors, spots counted with ``weight`` (N,)."""
        return self.prior_cost + float(weight @ np.sum(self.residual**2, axis=1))


def prior_weight(problem: FitProblem) -> FloatArray:
    """Weights (P,) of the priors; 0 where nothing is known beforehand."""
    u = np.array([parameter.u_prior for parameter in problem.parameters])
    return np.where(np.isfinite(u), 1.0 / u**2, 0.0)


def cut_in_blocks(problem: FitProblem, order: IntArray, weight: FloatArray) -> Blocks:
    """The problem in blocks of whole steps; ``order`` and ``weight`` are (N,)."""
    ends = np.append(problem.step_starts[1:], len(problem.table))
    cuts, parts = [0], []
    while cuts[-1] < problem.n_steps:
        begin = problem.step_starts[cuts[-1]]
        last = int(np.searchsorted(ends, begin + BLOCK_SPOTS, side="right"))
        cuts.append(max(last, cuts[-1] + 1))
    for first, last in zip(cuts[:-1], cuts[1:], strict=True):
        rows = problem.by_step[problem.step_starts[first] : ends[last - 1]]
        some = _some_steps(problem, rows, first, last)
        parts.append(Block(rows, first, last, some, order[rows], weight[rows]))
    return Blocks(problem, weight, prior_weight(problem), tuple(parts))


def _some_steps(
    problem: FitProblem, rows: IntArray, first: int, last: int
) -> FitProblem:
    """The problem of the spots ``rows``, all those of its steps, in their order."""
    return replace(
        problem,
        table=problem.table.take(rows),
        parameters=tuple(
            replace(p, coefficient=p.coefficient[rows]) for p in problem.parameters
        ),
        base=problem.base[rows],
        step_group=problem.step_group[rows] - first,
        by_step=np.arange(len(rows)),
        step_starts=problem.step_starts[first:last] - problem.step_starts[first],
        n_steps=last - first,
        whitener=problem.whitener[rows],
    )


def normal_equations(blocks: Blocks, state: FitState) -> Normal:
    """The equations of all blocks at ``state``."""
    problem, prior = blocks.problem, blocks.prior
    p, s, n = len(prior), problem.n_steps, len(problem.table)
    dense, right = np.zeros((p, p)), -prior * state.values
    border, diagonal, right_step = np.empty((p, s)), np.empty(s), np.empty(s)
    x_mm, y_mm, residual = np.empty(n), np.empty(n), np.empty((n, 2))
    used = np.empty(n, dtype=np.bool_)
    for block in blocks.parts:
        steps = slice(block.first, block.last)
        part, starts = block.problem, block.problem.step_starts
        here = FitState(state.values, state.step_error_rad[steps])
        there = predict(part, block.order, here)
        off = residuals(part, there)
        in_use = there.valid & (block.weight > 0.0)
        root = np.sqrt(np.where(in_use, block.weight, 0.0))
        slopes = _weighted(part.whitener, there.slopes, root)
        by_step = _weighted(part.whitener, there.step_slope, root)
        left = off.T * root
        flat = slopes.reshape(p, -1)
        dense += flat @ flat.T
        right += flat @ left.reshape(-1)
        both = slopes[:, 0] * by_step[0] + slopes[:, 1] * by_step[1]
        border[:, steps] = np.add.reduceat(both, starts, axis=1)
        diagonal[steps] = np.add.reduceat(np.sum(by_step**2, axis=0), starts)
        right_step[steps] = np.add.reduceat(np.sum(by_step * left, axis=0), starts)
        x_mm[block.rows], y_mm[block.rows] = there.x_mm, there.y_mm
        residual[block.rows], used[block.rows] = off, in_use
    step_weight = 1.0 / problem.u_step_rad**2
    errors = state.step_error_rad
    return Normal(
        state=state,
        dense=dense,
        border=border,
        diagonal=diagonal + step_weight,
        right=right,
        right_step=right_step - step_weight * errors,
        x_mm=x_mm,
        y_mm=y_mm,
        residual=residual,
        used=used,
        prior_cost=float(prior @ state.values**2 + step_weight * errors @ errors),
    )


def _weighted(
    whitener: FloatArray, vectors: FloatArray, root: FloatArray
) -> FloatArray:
    """Screen vectors (..., 2, n) whitened and times ``root`` (n,)."""
    # The whitener is a lower triangle.
    x, y = vectors[..., 0, :], vectors[..., 1, :]
    out = np.empty_like(vectors)
    np.multiply(x, whitener[:, 0, 0] * root, out=out[..., 0, :])
    np.multiply(y, whitener[:, 1, 1] * root, out=out[..., 1, :])
    out[..., 1, :] += x * (whitener[:, 1, 0] * root)
    return out


def information(normal: Normal, prior: FloatArray) -> FloatArray:
    """Information (P, P) of the parameters with the steps eliminated."""
    scaled_border = normal.border / normal.diagonal
    return np.asarray(normal.dense + np.diag(prior) - scaled_border @ normal.border.T)


def solve(
    normal: Normal, prior: FloatArray, damping: float
) -> tuple[FloatArray, FloatArray]:
    """Parameter and step moves (P,), (S,) for one damped step."""
    right = normal.right - normal.border @ (normal.right_step / normal.diagonal)
    move = damped_solution(information(normal, prior), right, damping)
    step_move = (normal.right_step - normal.border.T @ move) / normal.diagonal
    return move, step_move
