"""What a fit that settled must still be read with, in words."""

import math

from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.fit_scene import base_pitch_nm
from pitchsweep.analysis.joint_fit import JointFit
from pitchsweep.analysis.records import OrderTable, RejectedSpot, Rejection
from pitchsweep.analysis.robust_fit import CleanFit
from pitchsweep.configs.part_model import Part

PERCENT_LEVEL = 2e-3


def off_nominal(problem: FitProblem, fit: JointFit, part: Part) -> list[str]:
    """A warning where the pitch is not the one that the part file expects."""
    pitch_nm = base_pitch_nm(problem.parts[0]) * math.exp(fit.state.values[0])
    off = 100.0 * abs(pitch_nm / part.nominal_pitch_nm - 1.0)
    if off <= part.nominal_within_percent:
        return []
    return [
        f"the pitch is {off:.2f} % from the nominal {part.nominal_pitch_nm:g} nm, "
        f"more than the part file's nominal_within_percent "
        f"({part.nominal_within_percent:g}): is it this part?"
    ]


def off_screen_warnings(refused: list[RejectedSpot], table: OrderTable) -> list[str]:
    """A warning where many spots lie beside the screen of the bench file."""
    off = sum(r.reason is Rejection.OFF_SCREEN for r in refused)
    if off <= 0.2 * (off + len(table)):
        return []
    return [
        f"{off} of {off + len(table)} spots lie off the screen that the bench file "
        "describes: check the unit of x_mm and y_mm and whether they are swapped"
    ]


def plain_warnings(pitch_nm: float, u_nm: float, clean: CleanFit) -> list[str]:
    """Warnings of a coarse pitch and of many spots that were not used."""
    warnings = []
    if u_nm > PERCENT_LEVEL * pitch_nm:
        warnings.append(
            f"percent-level result (standard uncertainty {100.0 * u_nm / pitch_nm:.2g} "
            "%): it rests on the screen distance in the bench file; a sweep of angles "
            "with the zero order in view measures the distance itself"
        )
    n_used, n_all = int(clean.used.sum()), clean.used.shape[0]
    if n_used < 0.8 * n_all:
        warnings.append(
            f"{n_all - n_used} of {n_all} spots on the screen were not used: look at "
            "the rejected spots for ghosts, second gratings or a wrong nominal pitch"
        )
    return warnings
