"""Fits of drawn inputs, against fits of tables that really hold the drawn readings."""

import math
from dataclasses import replace

import numpy as np
import pytest
from builders import demo_job, twin_sweep
from numpy.typing import NDArray

from pitchsweep.analysis.air_index import AirState
from pitchsweep.analysis.drawn_descent import (
    DrawnInputs,
    Minimum,
    drawn_minima,
    first_order,
    minimum_of,
    side_by_side,
)
from pitchsweep.analysis.fit_problem import fit_problem
from pitchsweep.analysis.joint_fit import solve_joint_fit
from pitchsweep.analysis.measure import measure_pitch
from pitchsweep.analysis.redrawn_fit import drawn_values

DRAWS = 4


def small_minimum() -> Minimum:
    """A sweep of few steps with its orders told."""
    job = demo_job("shims-spots", recipe={"step_deg": 5.0})
    sweep = twin_sweep(job, 5)
    keep = np.hypot(sweep.table.x_mm, sweep.table.y_mm) > 6.0
    keep &= np.abs(sweep.true_order) < 100
    air = AirState(20.0, 1013.25, 50.0)
    problem = fit_problem(sweep.table.take(keep), job.bench, (job.part,), air)
    order = sweep.true_order[keep]
    fit = solve_joint_fit(problem, order, np.ones(len(order)))
    assert fit.converged and fit.used.all()
    return minimum_of(problem, order, fit)


def drawn_readings(at: Minimum, rng: np.random.Generator) -> DrawnInputs:
    """Readings drawn, prior means and step errors at their estimates."""
    n, p = len(at.problem.table), len(at.prior)
    return DrawnInputs(
        readings=rng.standard_normal((DRAWS, n, 2)),
        priors=np.zeros((DRAWS, p)),
        steps=np.zeros((DRAWS, at.problem.n_steps)),
    )


def u_of(at: Minimum) -> float:
    return math.sqrt(float(at.fit.covariance[0, 0]))


def test_drawn_readings_give_what_a_fit_of_them_gives() -> None:
    at = small_minimum()
    drawn = drawn_readings(at, np.random.default_rng(0))
    found = drawn_minima(at, side_by_side(at.problem, DRAWS), drawn)
    table, ones = at.problem.table, np.ones(len(at.order))
    for readings, value in zip(drawn.readings, found, strict=True):
        off = np.linalg.solve(at.problem.whitener, readings[:, :, None])[:, :, 0]
        moved = replace(table, x_mm=table.x_mm + off[:, 0], y_mm=table.y_mm + off[:, 1])
        fit = solve_joint_fit(replace(at.problem, table=moved), at.order, ones)
        assert value == pytest.approx(fit.state.values[0], abs=0.01 * u_of(at))


def test_undrawn_inputs_give_the_minimum_back() -> None:
    at = small_minimum()
    drawn = drawn_readings(at, np.random.default_rng(0))
    still = replace(drawn, readings=np.zeros_like(drawn.readings))
    found = drawn_minima(at, side_by_side(at.problem, DRAWS), still)
    np.testing.assert_allclose(found, at.fit.state.values[0], atol=1e-9 * u_of(at))


def test_a_prior_mean_carries_over_by_its_sensitivity() -> None:
    """A wavelength that was taken too short by 1 u: the pitch follows in proportion."""
    at = small_minimum()
    names = [p.name for p in at.problem.parameters]
    index = names.index("wavelength of red")
    drawn = drawn_readings(at, np.random.default_rng(0))
    priors = np.zeros_like(drawn.priors)
    priors[:, index] = (-1.0, 0.5, 1.0, 2.0)
    drawn = DrawnInputs(np.zeros_like(drawn.readings), priors, drawn.steps)
    found = drawn_minima(at, side_by_side(at.problem, DRAWS), drawn)
    u = at.problem.parameters[index].u_prior
    moved = found - at.fit.state.values[0]
    np.testing.assert_allclose(moved, u * priors[:, index], rtol=1e-3)


def test_first_order_effects_make_up_the_variance() -> None:
    at = small_minimum()
    along = first_order(at)
    parts: list[NDArray[np.float64]] = [along.readings, along.priors, along.steps]
    total = sum(float(np.sum(part**2)) for part in parts)
    assert total == pytest.approx(float(at.fit.covariance[0, 0]), rel=1e-6)


def test_strata_leave_the_draws_their_distribution() -> None:
    at = small_minimum()
    values = drawn_values(at, 200, math.inf, np.random.default_rng(1))
    pulls = (values - at.fit.state.values[0]) / u_of(at)
    assert np.isfinite(pulls).all()
    assert np.mean(pulls) == pytest.approx(0.0, abs=0.15)
    assert np.std(pulls) == pytest.approx(1.0, abs=0.1)
    again = drawn_values(at, 200, math.inf, np.random.default_rng(1))
    np.testing.assert_array_equal(again, values)


def test_readings_of_few_degrees_of_freedom_have_wider_tails() -> None:
    at = small_minimum()
    wide = drawn_values(at, 200, 5.0, np.random.default_rng(1))
    known = drawn_values(at, 200, math.inf, np.random.default_rng(1))
    assert np.ptp(wide) > np.ptp(known)


def test_a_result_can_be_borne_out_by_drawing_its_inputs(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """Half the values within U at 50 %, settled to the tolerance: few draws suffice."""
    monkeypatch.setattr("pitchsweep.analysis.redrawn_fit.JUDGING", 1.0)
    job = demo_job("shims-spots", recipe={"step_deg": 5.0})
    sweep = twin_sweep(job, 5)
    result = measure_pitch(
        sweep.table,
        bench=job.bench,
        part=job.part,
        coverage=0.5,
        generator=np.random.default_rng(0),
    )
    drawn = result.monte_carlo
    assert drawn is not None
    assert drawn.settled and drawn.lost == 0
    assert drawn.u_nm == pytest.approx(result.u_pitch_nm, rel=0.1)
    half = 0.5 * (drawn.high_nm - drawn.low_nm)
    assert half == pytest.approx(result.U_pitch_nm, rel=0.1)
