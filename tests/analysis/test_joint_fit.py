"""The solver: the same minimum and covariance as a general dense least squares."""

from dataclasses import replace

import numpy as np
import pytest
from builders import demo_job, twin_sweep
from scipy.optimize import least_squares

from pitchsweep.analysis.air_index import AirState
from pitchsweep.analysis.budget import combined_u, fit_budget
from pitchsweep.analysis.fit_parameters import Kind
from pitchsweep.analysis.fit_problem import FitProblem, fit_problem
from pitchsweep.analysis.joint_fit import solve_joint_fit
from pitchsweep.analysis.normal_equations import cut_in_blocks, normal_equations
from pitchsweep.analysis.prediction import (
    FitState,
    initial_state,
    predict,
    whitened,
)
from pitchsweep.analysis.records import IntArray

AIR = AirState(20.0, 1013.25, 50.0)


def small_problem(seed: int = 1) -> tuple[FitProblem, IntArray]:
    job = demo_job("shims-spots", recipe={"step_deg": 6.0})
    sweep = twin_sweep(job, seed)
    return fit_problem(sweep.table, job.bench, (job.part,), AIR), sweep.true_order


def test_minimum_and_covariance_equal_dense_least_squares() -> None:
    """scipy.optimize.least_squares on all unknowns, steps included."""
    problem, order = small_problem()
    fit = solve_joint_fit(problem, order, np.ones(len(problem.table)))
    u = np.array([p.u_prior for p in problem.parameters])
    count = len(u)

    def residuals(unknowns: np.ndarray) -> np.ndarray:
        state = FitState(unknowns[:count], unknowns[count:] * problem.u_step_rad)
        there = predict(problem, order, state)
        measured = np.stack([problem.table.x_mm, problem.table.y_mm], axis=1)
        off = whitened(problem, measured - np.stack([there.x_mm, there.y_mm], axis=1))
        prior = unknowns[1:count] / u[1:]
        return np.concatenate([off.ravel(), prior, unknowns[count:]])

    start = np.zeros(count + problem.n_steps)
    scale = np.concatenate([[1e-4], u[1:], np.ones(problem.n_steps)])
    dense = least_squares(
        residuals,
        start,
        # Two-point differences are themselves only good to a few 1e-9 here.
        jac="3-point",
        x_scale=scale,
        xtol=1e-15,
        ftol=1e-15,
        gtol=1e-12,
    )
    assert fit.converged
    assert fit.state.values[0] == pytest.approx(dense.x[0], abs=1e-9)
    information = dense.jac.T @ dense.jac
    root = np.sqrt(np.diag(information))
    covariance = np.linalg.inv(information / np.outer(root, root))
    u_dense = np.sqrt(covariance[0, 0]) / root[0]
    assert np.sqrt(fit.covariance[0, 0]) == pytest.approx(u_dense, rel=1e-4)


def test_jacobian_equals_differences_in_every_parameter() -> None:
    problem, order = small_problem()
    rng = np.random.default_rng(5)
    u = np.array([min(p.u_prior, 0.01) for p in problem.parameters])
    state = FitState(0.3 * u * rng.standard_normal(len(u)), np.zeros(problem.n_steps))
    there = predict(problem, order, state)
    for index, parameter in enumerate(problem.parameters):
        step = max(1e-4 * u[index], 1e-8)
        ahead, behind = state.values.copy(), state.values.copy()
        ahead[index] += step
        behind[index] -= step
        up = predict(problem, order, replace(state, values=ahead))
        down = predict(problem, order, replace(state, values=behind))
        slope = np.stack([up.x_mm - down.x_mm, up.y_mm - down.y_mm], axis=1)
        slope /= 2.0 * step
        size = max(1.0, float(np.abs(slope).max()))
        np.testing.assert_allclose(
            there.jacobian[:, :, index] / size,
            slope / size,
            atol=2e-6,
            err_msg=parameter.name,
        )


@pytest.mark.parametrize("off_percent", [-1.5, 1.5])
def test_converges_from_a_pitch_that_is_off(off_percent: float) -> None:
    problem, order = small_problem()
    weight = np.ones(len(problem.table))
    best = solve_joint_fit(problem, order, weight)
    start = initial_state(problem)
    start.values[0] = off_percent / 100.0
    again = solve_joint_fit(problem, order, weight, start)
    assert again.state.values[0] == pytest.approx(best.state.values[0], abs=1e-10)


def test_budget_lines_add_up_to_the_variance_of_the_fit() -> None:
    problem, order = small_problem()
    fit = solve_joint_fit(problem, order, np.ones(len(problem.table)))
    lines = fit_budget(problem, fit, 830.0)
    assert combined_u(lines) == pytest.approx(
        830.0 * np.sqrt(fit.covariance[0, 0]), rel=1e-9
    )
    assert all(line.u_nm > 0.0 for line in lines)


def test_contribution_of_a_prior_is_its_effect_on_the_pitch() -> None:
    """Move one prior mean by its u and refit: the pitch moves by the budget's share."""
    problem, order = small_problem()
    weight = np.ones(len(problem.table))
    fit = solve_joint_fit(problem, order, weight)
    index = next(
        i for i, p in enumerate(problem.parameters) if p.name == "screen distance"
    )
    assert problem.parameters[index].kind is Kind.LOCAL
    u = problem.parameters[index].u_prior
    base = problem.base.copy()
    base[:, problem.parameters[index].column] += 0.01 * u
    moved = solve_joint_fit(replace(problem, base=base), order, weight)
    effect = (moved.state.values[0] - fit.state.values[0]) / 0.01
    assert abs(effect) == pytest.approx(abs(fit.covariance[0, index]) / u, rel=0.02)


def test_spots_with_no_weight_do_not_matter() -> None:
    problem, order = small_problem()
    weight = np.ones(len(problem.table))
    weight[::7] = 0.0
    fit = solve_joint_fit(problem, order, weight)
    x_mm = problem.table.x_mm.copy()
    x_mm[::7] += 50.0
    spoilt = replace(problem, table=replace(problem.table, x_mm=x_mm))
    again = solve_joint_fit(spoilt, order, weight)
    assert again.state.values[0] == fit.state.values[0]


def test_blocks_make_no_difference_to_the_equations(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """Steps are shuffled: the spots of a block lie apart in the table."""
    problem, order = small_problem()
    weight = np.linspace(0.5, 1.0, len(order))
    state = initial_state(problem)
    whole = normal_equations(cut_in_blocks(problem, order, weight), state)
    monkeypatch.setattr("pitchsweep.analysis.normal_equations.BLOCK_SPOTS", 4)
    blocks = cut_in_blocks(problem, order, weight)
    assert len(blocks.parts) > 3
    cut = normal_equations(blocks, state)
    for name in ("dense", "border", "diagonal", "right", "right_step", "residual"):
        one, other = getattr(whole, name), getattr(cut, name)
        np.testing.assert_allclose(other, one, rtol=1e-12, atol=1e-12 * np.ptp(one))
    np.testing.assert_array_equal(cut.used, whole.used)


def test_a_start_from_some_of_the_steps_ends_at_the_same_minimum(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    problem, order = small_problem()
    weight = np.ones(len(order))
    plain = solve_joint_fit(problem, order, weight)
    monkeypatch.setattr("pitchsweep.analysis.joint_fit.MANY_STEPS", 10)
    monkeypatch.setattr("pitchsweep.analysis.joint_fit.SOME_STEPS", 7)
    assert problem.n_steps > 10
    fit = solve_joint_fit(problem, order, weight)
    assert fit.converged
    assert fit.state.values[0] == pytest.approx(plain.state.values[0], abs=1e-9)
