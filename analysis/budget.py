"""The uncertainty budget: every independent input once, and what it contributes.

At the minimum the pitch is a linear function of independent inputs: the readings, the
prior means of the parameters, the prior means of the step errors. Their contributions
add up, in squares, exactly to the fit's own variance.
"""

import math

import numpy as np

from pitchsweep.analysis.budget_words import readings_detail, source_detail
from pitchsweep.analysis.fit_parameters import Source
from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.joint_fit import JointFit
from pitchsweep.analysis.records import BudgetLine

READINGS = "spot positions"


def fit_budget(problem: FitProblem, fit: JointFit, pitch_nm: float) -> list[BudgetLine]:
    """Contributions of readings and priors to the pitch (parameter 0), in nm."""
    row = fit.covariance[0]
    shares: dict[str, float] = {}
    for index, parameter in enumerate(problem.parameters):
        if math.isfinite(parameter.u_prior):
            part = (row[index] / parameter.u_prior) ** 2
            shares[parameter.source] = shares.get(parameter.source, 0.0) + part
    steps = float(np.sum((fit.step_pull[0] / problem.u_step_rad) ** 2))
    shares[Source.STEPS] = steps
    readings = max(0.0, float(row[0]) - sum(shares.values()))
    lines = [
        BudgetLine(
            READINGS,
            "A",
            pitch_nm * math.sqrt(readings),
            readings_detail(int(fit.used.sum())),
        )
    ]
    lines += [
        BudgetLine(
            str(source),
            "B",
            pitch_nm * math.sqrt(share),
            source_detail(problem, fit, source, pitch_nm),
        )
        for source, share in shares.items()
    ]
    return lines


def combined_u(lines: list[BudgetLine]) -> float:
    """Root of the sum of squares of the contributions, nm."""
    return math.sqrt(sum(line.u_nm**2 for line in lines))
