"""The uncertainty budget: every independent input once, and what it contributes.

At the minimum the pitch is a linear function of independent inputs: the readings, the
prior means of the parameters, the prior means of the step errors. Their contributions
add up, in squares, exactly to the fit's own variance. Air, expansion and temperature
enter after the fit.
"""

import math
from dataclasses import dataclass

import numpy as np

from pitchsweep.analysis.air_index import AirState, air_index, air_index_u
from pitchsweep.analysis.fit_parameters import FitProblem, Source
from pitchsweep.analysis.joint_fit import JointFit
from pitchsweep.analysis.records import BudgetLine
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Material

REFERENCE_C = 20.0
READINGS = "spot positions"


@dataclass(frozen=True)
class AtReference:
    """Factor from the pitch as swept to the pitch at 20 deg C, and its u parts."""

    factor: float
    u_by_temperature: float
    u_by_expansion: float


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
    lines = [BudgetLine(READINGS, "A", pitch_nm * math.sqrt(readings))]
    lines += [
        BudgetLine(str(source), "B", pitch_nm * math.sqrt(share))
        for source, share in shares.items()
    ]
    return lines


def at_reference(material: Material) -> AtReference:
    """Expansion back to 20 deg C (ISO 1 reference temperature, from memory)."""
    dt = material.temperature_C - REFERENCE_C
    return AtReference(
        factor=1.0 / (1.0 + material.expansion_per_K * dt),
        u_by_temperature=abs(material.expansion_per_K) * material.u_temperature_C,
        u_by_expansion=abs(dt) * material.u_expansion_per_K,
    )


def after_fit_budget(
    pitch_nm: float, bench: Bench, laser: str, air: AirState, material: Material
) -> list[BudgetLine]:
    """Air index, temperature and expansion, in nm."""
    u_air = AirState(
        bench.air.u_temperature_C,
        bench.air.u_pressure_hPa,
        bench.air.u_humidity_percent,
    )
    wavelength = bench.lasers[laser].vacuum_wavelength_nm
    index = air_index(wavelength, air)
    u_index = air_index_u(wavelength, air, u_air)
    reference = at_reference(material)
    return [
        BudgetLine("air index", "B", pitch_nm * u_index / index),
        BudgetLine(
            "temperature of the part", "B", pitch_nm * reference.u_by_temperature
        ),
        BudgetLine("expansion coefficient", "B", pitch_nm * reference.u_by_expansion),
    ]


def combined_u(lines: list[BudgetLine]) -> float:
    """Root of the sum of squares of the contributions, nm."""
    return math.sqrt(sum(line.u_nm**2 for line in lines))
