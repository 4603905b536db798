"""What the fit had to make of the bench: priors that the data pull far away.

A wrong unit, swapped columns or another bench's file still give a fit that looks well
by itself; what shows is how far the bench would have to be from its own description.
"""

import numpy as np

from pitchsweep.analysis.analysis_errors import NoResult
from pitchsweep.analysis.fit_parameters import Parameter
from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.joint_fit import JointFit

DOUBTFUL = 4.5
"""Standard uncertainties of its prior by which hardly any unknown is off by chance."""
BEYOND_BELIEF = 10.0


def prior_warnings(problem: FitProblem, fit: JointFit) -> list[str]:
    """A warning for the unknown furthest from its prior, if it is doubtful.

    Raises NoResult where it is beyond belief: the pitch would be that of another
    bench than the file describes.
    """
    u = np.array([parameter.u_prior for parameter in problem.parameters])
    pull = np.where(np.isfinite(u), np.abs(fit.state.values) / u, 0.0)
    # The certified pitch of a reference may be tested like any other prior.
    worst = int(np.argmax(pull))
    if pull[worst] < DOUBTFUL:
        return []
    said = _said(problem.parameters[worst], float(fit.state.values[worst]), pull[worst])
    if pull[worst] > BEYOND_BELIEF:
        raise NoResult(
            f"the spots fit only if {said}",
            remedy="check the unit of x_mm and y_mm, whether they are swapped, and "
            "whether bench and part files are those of these data",
        )
    return [f"the spots fit only if {said}: check units, bench and part files"]


def _said(parameter: Parameter, value: float, pull: float) -> str:
    scale, unit = parameter.shown_scale, parameter.unit
    if parameter.mean:
        there = f"{parameter.mean + value * scale:.6g} {unit}"
        known = f"{parameter.mean:.6g} +- {parameter.u_prior * scale:.2g} {unit}"
    else:
        there = f"{value * scale:.3g} {unit}"
        known = f"0 +- {parameter.u_prior * scale:.2g} {unit}"
    return f"{parameter.name} is {there}, {pull:.0f} times off its {known}"
