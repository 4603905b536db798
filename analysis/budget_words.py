"""What each line of the budget is, in words, and how the pitch depends on it."""

import math
from collections.abc import Sequence

from pitchsweep.analysis.fit_parameters import Parameter, Source
from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.joint_fit import JointFit
from pitchsweep.analysis.number_text import significant
from pitchsweep.analysis.records import Nuisance

MEANING = {
    Source.PITCH: "what the certificate of the reference leaves open",
    Source.WAVELENGTH: "vacuum wavelength as the bench file states it",
    Source.AIR: "refractive index from the air's temperature, pressure and humidity",
    Source.TEMPERATURE: "how far from 20 deg C the part really was",
    Source.EXPANSION: "how much the part grows with temperature",
    Source.SCREEN: "where the screen really stands",
    Source.MAP: "smooth errors of the map from pixels to millimetres",
    Source.LENS: "lens that shows places further out than they are",
    Source.BEAM: "where the beam really runs",
    Source.SEAT: "how the part really sits in each mount",
    Source.COVER: "thickness, index and wedge of a clear layer over the grooves",
    Source.SPIRAL: "turn of the grooves within the beam, by its width and the radius",
    Source.CURVATURE: "bend of the part across the grooves",
    Source.HARMONICS: "stage angles that are wrong the same way every turn",
    Source.WORM: "stage angles that are wrong with the worm's period",
    Source.BACKLASH: "stage angles that differ after coming from below and from above",
    Source.SCALE: "degrees of the stage that are too long or too short",
    Source.DRIFT: "wandering of camera, beam and wavelength during a run",
    Source.JUMP: "sizes of the jumps that the laser wavelength made",
    Source.STEPS: "stage angles that are wrong by chance, step by step",
}
MOST_CORRELATED = 5
INDEPENDENT = (
    "The lines are independent of each other by construction: each is what one group"
    " of inputs, readings or prior knowledge, adds to the pitch, and no input is in"
    " two of them."
)
"""What the report says of correlations between the budget's inputs."""


def correlation_words(nuisances: Sequence[Nuisance]) -> str:
    """The fitted quantities that go most with the pitch, with their correlations."""
    ranked = sorted(nuisances, key=lambda n: -abs(n.correlation))[:MOST_CORRELATED]
    told = [n for n in ranked if abs(n.correlation) >= 0.005]
    words = [f"{n.name} ({n.correlation:+.2f})" for n in told]
    return "; ".join(words).replace("(-", "(\N{MINUS SIGN}")


def readings_detail(spots: int) -> str:
    """Words for the line of the spot positions."""
    return f"{spots} spots read with their stated uncertainty, x and y"


def source_detail(
    problem: FitProblem, fit: JointFit, source: str, pitch_nm: float
) -> str:
    """Words for a source of priors, with the sensitivity to the unknown that counts.

    The sensitivity is the change of the pitch per unit by which that unknown was
    taken wrongly beforehand.
    """
    meaning = MEANING.get(Source(source), "")
    members = [
        (abs(float(fit.covariance[0, i]) / p.u_prior), i, p)
        for i, p in enumerate(problem.parameters)
        if p.source == source and math.isfinite(p.u_prior)
    ]
    if not members:
        return meaning
    _, index, most = max(members, key=lambda member: member[:2])
    slope = pitch_nm * float(fit.covariance[0, index]) / most.u_prior**2
    return "; ".join(filter(None, (meaning, _sensitivity(most, slope, len(members)))))


def _sensitivity(most: Parameter, slope: float, members: int) -> str:
    which = "" if members == 1 else f"of {members} unknowns most by "
    u = significant(most.u_prior * most.shown_scale)
    per_unit = significant(slope / most.shown_scale)
    unit = {"1": "", "1e-6": " x 1e-6"}.get(most.unit, f" {most.unit}")
    per = " nm" if most.unit == "1" else f" nm per {most.unit}"
    return f"{which}{most.name}: u {u}{unit}, {per_unit}{per}"
