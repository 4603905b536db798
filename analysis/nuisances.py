"""The fitted quantities beside the pitch, in the units that people read."""

import math

from pitchsweep.analysis.fit_parameters import Kind
from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.joint_fit import JointFit
from pitchsweep.analysis.records import Nuisance
from pitchsweep.analysis.weak_directions import correlations_with_pitch


def fitted_nuisances(problem: FitProblem, fit: JointFit) -> tuple[Nuisance, ...]:
    """Every parameter but the pitch, with its prior and its share in the pitch."""
    rows, correlation = [], correlations_with_pitch(fit)
    for index, parameter in enumerate(problem.parameters[1:], start=1):
        scale, mean = parameter.shown_scale, parameter.mean
        value = float(fit.state.values[index])
        if parameter.kind is Kind.LOG_RATIO and mean:
            value = mean * math.exp(value)
        else:
            value = mean + value * scale
        rows.append(
            Nuisance(
                name=parameter.name,
                value=value,
                u=math.sqrt(max(0.0, float(fit.covariance[index, index]))) * scale,
                unit=parameter.unit,
                prior=mean,
                u_prior=parameter.u_prior * scale,
                correlation=float(correlation[index]),
            )
        )
    return tuple(rows)
