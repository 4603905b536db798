"""The angles at which a job has light on its part. Pure.

Between steps it is dark, so these are the permitted steps. With several mounts a part
may be left as it was by mistake: the angles at which the beam then meets it count too,
its back included. Neighbours closer than half a degree stand together.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from pitchsweep.configs.job_model import Job
from pitchsweep.configs.recipe_model import Recipe

TOGETHER_DEG = 0.5


@dataclass(frozen=True)
class LitAngle:
    """Incidences that stand together: their middle and half width, in degrees.

    ``steps_deg`` are the planned incidences of the steps concerned; ``left_behind``
    says that the part stayed as in another mount, so that the beam meets it elsewhere.
    """

    incidence_deg: float
    half_width_deg: float
    steps_deg: tuple[float, ...]
    left_behind: bool = False


def lit_angles(job: Job) -> tuple[LitAngle, ...]:
    """Every angle at which light falls on the part, as planned or left behind."""
    grid = grid_deg(job.recipe)
    planned = [(_folded(step), step) for step in grid]
    known = {round(incidence, 6) for incidence, _ in planned}
    mounts, sense = job.recipe.mounts_deg, job.bench.stage.direction
    turned = {sense * (m - other) % 360.0 for m in mounts for other in mounts}
    left = [
        (_folded(step + turn), step) for turn in sorted(turned - {0.0}) for step in grid
    ]
    elsewhere = [pair for pair in left if round(pair[0], 6) not in known]
    return _grouped(planned, False) + _grouped(elsewhere, True)


def grid_deg(recipe: Recipe) -> tuple[float, ...]:
    """The incidences of a recipe, rising, the stop included if a step reaches it.

    Those of its shifted repeats stand among them.
    """
    angles: set[float] = set()
    for repeat in range(recipe.repeats):
        start = recipe.start_deg + repeat * recipe.repeat_shift_deg
        count = int(np.floor((recipe.stop_deg - start) / recipe.step_deg + 1e-9)) + 1
        angles |= {start + i * recipe.step_deg for i in range(count)}
    return tuple(sorted(angles))


def steps_text(steps_deg: Sequence[float], step_deg: float) -> str:
    """ "the 3 steps at incidence 10 to 12 deg", gaps wider than ``step_deg`` shown."""
    if not steps_deg:
        return "every step"
    angles = sorted(set(steps_deg))
    runs: list[list[float]] = []
    for angle in angles:
        if runs and angle - runs[-1][1] <= 1.01 * step_deg:
            runs[-1][1] = angle
        else:
            runs.append([angle, angle])
    spans = [f"{a:g}" if a == b else f"{a:g} to {b:g}" for a, b in runs]
    shown = ", ".join(spans[:4]) + (", ..." if len(spans) > 4 else "")
    count = "step" if len(angles) == 1 else f"{len(angles)} steps"
    return f"the {count} at incidence {shown} deg"


def _folded(incidence_deg: float) -> float:
    """Within -90 to 90: beyond, the beam meets the other face at 180 degrees less."""
    return (incidence_deg + 90.0) % 180.0 - 90.0


def _grouped(
    pairs: Sequence[tuple[float, float]], left_behind: bool
) -> tuple[LitAngle, ...]:
    bins: dict[int, list[tuple[float, float]]] = {}
    for incidence, step in pairs:
        place = int(np.floor(incidence / TOGETHER_DEG + 1e-6))
        bins.setdefault(place, []).append((incidence, step))
    return tuple(
        LitAngle(
            incidence_deg=0.5 * (min(p)[0] + max(p)[0]),
            half_width_deg=0.5 * (max(p)[0] - min(p)[0]),
            steps_deg=tuple(sorted({step for _, step in p})),
            left_behind=left_behind,
        )
        for _, p in sorted(bins.items())
    )
