"""Wavelengths that the sweep tells better than the bench file: results of their own.

A part of certified pitch, or another laser on the same part, carries them.
"""

import math

from pitchsweep.analysis.decision import coverage_factor
from pitchsweep.analysis.fit_parameters import Source
from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.joint_fit import JointFit
from pitchsweep.analysis.records import WavelengthFound

WORTH_TELLING = 0.5
"""A wavelength is told when its u fell below this part of what it was."""


def wavelengths_found(
    problem: FitProblem,
    fit: JointFit,
    *,
    coverage: float,
    dof: float,
    beside: float = 0.0,
) -> tuple[WavelengthFound, ...]:
    """The vacuum wavelengths (means over the runs) that the fit found.

    ``dof``: degrees of freedom of the readings; ``beside``: relative u of what the
    budget adds beside the fit, which may lie in the wavelength as well.
    """
    k = coverage_factor(coverage, max(dof, 1.0))
    prefix = "wavelength of "
    found = []
    for index, parameter in enumerate(problem.parameters):
        if parameter.source is not Source.WAVELENGTH:
            continue
        relative = math.hypot(math.sqrt(float(fit.covariance[index, index])), beside)
        if relative > WORTH_TELLING * parameter.u_prior:
            continue
        nm = parameter.mean * math.exp(float(fit.state.values[index]))
        found.append(
            WavelengthFound(
                laser=parameter.name.removeprefix(prefix),
                vacuum_nm=nm,
                u_nm=nm * relative,
                U_nm=k * nm * relative,
                k=k,
                prior_nm=parameter.mean,
                u_prior_nm=parameter.mean * parameter.u_prior,
            )
        )
    return tuple(found)
