"""How the readings scatter against what they state, and what is made of it."""

import math
from dataclasses import dataclass

import numpy as np

from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.joint_fit import JointFit, solve_joint_fit
from pitchsweep.analysis.robust_fit import CleanFit, rescaled, residual_2


@dataclass(frozen=True)
class Scatter:
    """How the readings scatter against what they state."""

    reduced_chi2: float
    dof: float


def scatter_of(problem: FitProblem, clean: CleanFit, fit: JointFit) -> Scatter:
    """Reduced chi-squared of the readings, with what the unknowns absorb taken off."""
    absorbed = 0.0
    for index, parameter in enumerate(problem.parameters):
        known = fit.covariance[index, index] / parameter.u_prior**2
        absorbed += 1.0 - min(1.0, float(known))
    pulls = fit.step_variance * (1.0 / problem.u_step_rad**2)
    absorbed += float(np.sum(1.0 - np.minimum(1.0, pulls)))
    dof = 2.0 * float(clean.used.sum()) - absorbed
    if dof < 0.5:
        return Scatter(math.nan, 0.0)
    return Scatter(float(np.sum(residual_2(fit)[clean.used])) / dof, dof)


def with_honest_scatter(
    problem: FitProblem, clean: CleanFit
) -> tuple[FitProblem, JointFit, Scatter, list[str]]:
    """Readings that scatter more than stated are taken at their scatter."""
    fit = clean.fit
    scatter = scatter_of(problem, clean, fit)
    warnings: list[str] = []
    if scatter.dof <= 0.0:
        return problem, fit, scatter, warnings
    excess = scatter.reduced_chi2 - 1.0
    if excess > 3.0 * math.sqrt(2.0 / scatter.dof):
        factor = math.sqrt(scatter.reduced_chi2)
        warnings.append(
            f"spots scatter {factor:.2f} times their stated uncertainty; the readings' "
            "share of the uncertainty is enlarged by that"
        )
        problem = rescaled(problem, factor)
        weight = clean.used.astype(np.float64)
        fit = solve_joint_fit(problem, clean.order, weight, fit.state)
    return problem, fit, scatter, warnings
