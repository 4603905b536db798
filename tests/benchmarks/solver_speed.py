"""The joint solver against dense finite-difference least squares, and its growth.

Usage: python tests/benchmarks/solver_speed.py [--dense-steps 500]
Same problem, same start, one process, one thread: ratio of times and difference of the
answers; then time a step of the solver from 500 to 20 000 steps.
"""

import argparse
import os
import sys
import time
from pathlib import Path

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

import numpy as np  # noqa: E402
from builders import demo_job, twin_sweep  # noqa: E402
from scipy.optimize import least_squares  # noqa: E402

from pitchsweep.analysis.air_index import AirState  # noqa: E402
from pitchsweep.analysis.fit_problem import FitProblem, fit_problem  # noqa: E402
from pitchsweep.analysis.joint_fit import (  # noqa: E402
    solve_joint_fit,
)
from pitchsweep.analysis.prediction import (  # noqa: E402
    FitState,
    predict,
    whitened,
)
from pitchsweep.analysis.records import IntArray  # noqa: E402

AIR = AirState(20.0, 1013.25, 50.0)


def problem_of(steps: int) -> tuple[FitProblem, IntArray]:
    """A sweep of the shim over +-60 degrees in about that many steps."""
    recipe = {"start_deg": -60.0, "stop_deg": 60.0, "step_deg": 120.0 / (steps - 1)}
    job = demo_job("shims-spots", recipe=recipe)
    sweep = twin_sweep(job, 0)
    problem = fit_problem(sweep.table, job.bench, (job.part,), AIR)
    keep = (
        predict(
            problem,
            sweep.true_order,
            FitState(np.zeros(len(problem.parameters)), np.zeros(problem.n_steps)),
        ).leaving
        > 0.05
    )
    table = sweep.table.take(keep)
    return fit_problem(table, job.bench, (job.part,), AIR), sweep.true_order[keep]


def dense(problem: FitProblem, order: IntArray) -> tuple[float, float, float]:
    """Pitch deviation and seconds of scipy's least squares on all unknowns.

    The first number is with its default two-point differences, which are timed; the
    second after going on from there with three-point ones, whose error is smaller.
    """
    u = np.array([p.u_prior for p in problem.parameters])
    count = len(u)

    def residuals(unknowns: "np.ndarray[tuple[int], np.dtype[np.float64]]"):  # type: ignore[no-untyped-def]
        state = FitState(unknowns[:count], unknowns[count:] * problem.u_step_rad)
        there = predict(problem, order, state)
        measured = np.stack([problem.table.x_mm, problem.table.y_mm], axis=1)
        off = whitened(problem, measured - np.stack([there.x_mm, there.y_mm], axis=1))
        return np.concatenate(
            [off.ravel(), unknowns[1:count] / u[1:], unknowns[count:]]
        )

    scale = np.concatenate([[1e-4], u[1:], np.ones(problem.n_steps)])
    start = time.perf_counter()
    found = least_squares(
        residuals,
        np.zeros(count + problem.n_steps),
        x_scale=scale,
        xtol=1e-15,
        ftol=1e-15,
        gtol=1e-12,
    )
    seconds = time.perf_counter() - start
    finer = least_squares(
        residuals, found.x, jac="3-point", x_scale=scale, xtol=1e-15, ftol=1e-15
    )
    return float(found.x[0]), float(finer.x[0]), seconds


def ours(problem: FitProblem, order: IntArray) -> tuple[float, float]:
    weight = np.ones(len(problem.table))
    start = time.perf_counter()
    fit = solve_joint_fit(problem, order, weight)
    return float(fit.state.values[0]), time.perf_counter() - start


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--dense-steps", type=int, default=500)
    options = parser.parse_args()
    problem, order = problem_of(options.dense_steps)
    ours(problem, order)
    mine, mine_s = ours(problem, order)
    theirs, finer, theirs_s = dense(problem, order)
    print(
        f"{problem.n_steps} steps, {len(problem.table)} spots, "
        f"{len(problem.parameters)} parameters: {theirs_s:.1f} s dense, "
        f"{mine_s:.3f} s here, ratio {theirs_s / mine_s:.0f}; answers differ by "
        f"{abs(mine - theirs):.1e} of the pitch, by {abs(mine - finer):.1e} with "
        "finer differences"
    )
    print("steps   seconds   us/step")
    for steps in (500, 1000, 2000, 5000, 10000, 20000):
        problem, order = problem_of(steps)
        taken = min(ours(problem, order)[1] for _ in range(3))
        print(f"{problem.n_steps:6d} {taken:8.3f} {1e6 * taken / problem.n_steps:8.1f}")


if __name__ == "__main__":
    main()
