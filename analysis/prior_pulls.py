"""What the fit had to make of the bench: priors that the data pull far away.

A wrong unit, swapped columns or another bench's file still give a fit that looks well
by itself; what shows is how far the bench would have to be from its own description.
What the file says to be known very well hardly moves; it is the little that it moves,
against the little that it should by chance, that tells.
"""

import numpy as np

from pitchsweep.analysis.analysis_errors import NoResult
from pitchsweep.analysis.fit_parameters import Parameter
from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.joint_fit import JointFit
from pitchsweep.analysis.records import FloatArray

DOUBTFUL = 4.5
"""Standard uncertainties by which hardly any unknown is off by chance."""
TOLD = 1e-6
"""Share of a prior's variance below which the data are taken to say nothing of it."""
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
        return _contradicted(problem, fit, u)
    said = _said(problem.parameters[worst], float(fit.state.values[worst]), pull[worst])
    if pull[worst] > BEYOND_BELIEF:
        raise NoResult(
            f"the spots fit only if {said}",
            remedy="check the unit of x_mm and y_mm, whether they are swapped, and "
            "whether bench and part files are those of these data",
        )
    return [f"the spots fit only if {said}: check units, bench and part files"]


def _contradicted(problem: FitProblem, fit: JointFit, u: FloatArray) -> list[str]:
    """A warning for the tight prior that the data contradict most, if they do.

    Where prior and data agree, the fitted value scatters about the prior with the
    variance by which the data lessened it.
    """
    known = np.isfinite(u)
    variance = np.where(known, u, 1.0) ** 2
    lessened = variance - np.diag(fit.covariance)
    told = known & (lessened > TOLD * variance)
    scatter = np.sqrt(np.where(told, lessened, 1.0))
    pull = np.where(told, np.abs(fit.state.values) / scatter, 0.0)
    worst = int(np.argmax(pull))
    if pull[worst] < DOUBTFUL:
        return []
    parameter = problem.parameters[worst]
    known_to = f"{parameter.u_prior * parameter.shown_scale:.2g} {parameter.unit}"
    alone = fit.state.values[worst] * variance[worst] / lessened[worst]
    there = f"{parameter.mean + alone * parameter.shown_scale:.3g} {parameter.unit}"
    return [
        f"{parameter.name} is said to be known to {known_to}, but the spots ask for "
        f"{there}, {pull[worst]:.0f} times what chance explains: check it, or state a "
        "larger uncertainty"
    ]


def _said(parameter: Parameter, value: float, pull: float) -> str:
    scale, unit = parameter.shown_scale, parameter.unit
    if parameter.mean:
        there = f"{parameter.mean + value * scale:.6g} {unit}"
        known = f"{parameter.mean:.6g} +- {parameter.u_prior * scale:.2g} {unit}"
    else:
        there = f"{value * scale:.3g} {unit}"
        known = f"0 +- {parameter.u_prior * scale:.2g} {unit}"
    return f"{parameter.name} is {there}, {pull:.0f} times off its {known}"
