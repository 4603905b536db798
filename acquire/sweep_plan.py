"""Job -> the steps of a sweep, in the order in which they are taken (pure).

The parts of a lot come outermost, then mounts (a person re-seats the part between
them; mounts are numbered on through the lot), then repeats with a shifted grid, then
lasers, then angles. Every step carries the bench time at which the
plan places it, so that a twin's slow processes depend on the plan and not on
interruptions.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import product
from random import Random
from typing import Literal

import numpy as np

from pitchsweep.acquire.acquire_errors import JobRefused
from pitchsweep.acquire.zero_order_watch import zero_check_incidence_deg
from pitchsweep.analysis.order_visibility import (
    remedy_of_no_order,
    visible_orders,
    why_no_order,
)
from pitchsweep.configs.bench_model import Bench, Stage
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.part_model import Part
from pitchsweep.configs.recipe_model import Recipe

Kind = Literal["step", "zero-check"]


@dataclass(frozen=True)
class Step:
    """One stage angle: what is commanded and what is exposed there.

    ``stage_deg`` lies in the stage's travel with room to approach it from below.
    ``part`` says which part of a lot is in, counted as they are seated.
    ``first_frame`` is the number of its first frame file: dark frames first (one an
    exposure, if ``dark_due``), then the light ones.
    """

    step: int
    kind: Kind
    mount: int
    mount_deg: float
    laser: str
    incidence_deg: float
    stage_deg: float
    exposures_ms: tuple[float, ...]
    dark_due: bool
    planned_s: float
    first_frame: int
    repeat: int = 0
    face_deg: float = 0.0
    part: int = 0


@dataclass(frozen=True)
class SweepPlan:
    """The steps in time order and one zero check for every (mount, laser)."""

    job: str
    steps: tuple[Step, ...]
    zero_checks: tuple[Step, ...]
    duration_s: float
    frames: int

    def zero_check_for(self, step: Step) -> Step:
        """The zero check with the mount and laser of ``step``."""
        for check in self.zero_checks:
            if (check.mount, check.laser) == (step.mount, step.laser):
                return check
        raise KeyError(f"no zero check for mount {step.mount}, laser {step.laser}")


def plan_sweep(job: Job, fingerprint: str) -> SweepPlan:
    """The plan of ``job``; ``fingerprint`` (any text) seeds a shuffled order.

    Raises JobRefused when no order but zero reaches the screen with one of the
    lasers, when a step lies outside the stage's travel, or when the zero order is
    nowhere predicted well on the screen and off the hole.
    """
    recipe = job.recipe
    grid_deg = incidence_grid_deg(recipe)
    refuse_without_orders(job, grid_deg)
    check_deg = [_zero_check_or_refuse(job, part, grid_deg) for part in job.seated]
    rows = [
        (mount, repeat, laser, incidence)
        for mount in range(len(job.seated) * len(recipe.mounts_deg))
        for repeat in range(recipe.repeats)
        for laser in recipe.lasers
        for incidence in ordered(
            incidence_grid_deg(recipe, repeat),
            recipe.angle_order,
            f"{fingerprint}/{mount}/{laser}" + (f"/{repeat}" if repeat else ""),
        )
    ]
    steps: list[Step] = []
    clock_s, frame, since_dark = 0.0, 0, 0
    previous: Step | None = None
    for number, (mount, repeat, laser, incidence) in enumerate(rows):
        new_group = previous is None or group_of(previous) != (mount, repeat, laser)
        dark_due = new_group or since_dark >= recipe.dark_every_steps
        since_dark = 1 if dark_due else since_dark + 1
        step = Step(
            step=number,
            kind="step",
            mount=mount,
            mount_deg=recipe.mount_deg_of(mount),
            laser=laser,
            incidence_deg=incidence,
            stage_deg=reachable_stage_deg(job, mount, incidence),
            exposures_ms=recipe.exposures_ms,
            dark_due=dark_due,
            planned_s=clock_s,
            first_frame=frame,
            repeat=repeat,
            face_deg=recipe.face_of(mount),
            part=job.seat_of(mount),
        )
        steps.append(step)
        clock_s += step_duration_s(job.bench, step, previous)
        frame += frames_of(step)
        previous = step
    checks = _zero_checks(job, check_deg, steps, frame)
    return SweepPlan(job.job, tuple(steps), checks, clock_s, frame)


def group_of(step: Step) -> tuple[int, int, str]:
    """What a step shares with its neighbours: mount, repeat, laser."""
    return step.mount, step.repeat, step.laser


def incidence_grid_deg(recipe: Recipe, repeat: int = 0) -> tuple[float, ...]:
    """Incidences from start to stop (stop included if a whole step reaches it).

    The grid of a later ``repeat`` begins so many shifts higher.
    """
    start_deg = recipe.start_deg + repeat * recipe.repeat_shift_deg
    span = recipe.stop_deg - start_deg
    count = int(np.floor(span / recipe.step_deg + 1e-9)) + 1
    return tuple(
        round(start_deg + index * recipe.step_deg, 9) for index in range(count)
    )


def ordered(
    grid_deg: tuple[float, ...], order: str, seed_text: str
) -> tuple[float, ...]:
    """The angles of a rising grid in time order.

    ``up`` keeps it; ``up-down`` takes every second angle going up and the others
    coming down; ``shuffled`` permutes them, seeded by ``seed_text``.
    """
    if order == "up":
        return grid_deg
    if order == "up-down":
        return grid_deg[0::2] + grid_deg[1::2][::-1]
    shuffled = list(grid_deg)
    Random(seed_text).shuffle(shuffled)
    return tuple(shuffled)


def frames_of(step: Step) -> int:
    """How many frame files a step makes, dark ones included."""
    return len(step.exposures_ms) * (2 if step.dark_due else 1)


def step_duration_s(bench: Bench, step: Step, previous: Step | None) -> float:
    """Bench time from the start of a step to the start of the next."""
    start_deg = step.stage_deg if previous is None else previous.stage_deg
    motion_s = travel_deg(start_deg, step.stage_deg, bench.stage.approach_deg) / (
        bench.stage.speed_deg_per_s
    )
    bracket_s = sum(e / 1000.0 + bench.camera.readout_s for e in step.exposures_ms)
    brackets = 2 if step.dark_due else 1
    return motion_s + bench.stage.settle_s + brackets * bracket_s


def travel_deg(start_deg: float, target_deg: float, approach_deg: float) -> float:
    """Way of the stage when every angle is approached from below."""
    if target_deg - start_deg >= approach_deg:
        return target_deg - start_deg
    return abs(start_deg - (target_deg - approach_deg)) + approach_deg


def reachable_stage_deg(job: Job, mount: int, incidence_deg: float) -> float:
    """``mount_deg + direction * incidence``, turned by whole turns into the travel.

    Of several that fit, the one with the fewest turns. Raises JobRefused if none
    fits with room below it for the approach.
    """
    stage = job.bench.stage
    wanted = job.recipe.mount_deg_of(mount) + stage.direction * incidence_deg
    for turns in (0, -1, 1, -2, 2, -3, 3):
        if _in_travel(stage, wanted + 360.0 * turns):
            return round(wanted + 360.0 * turns, 9)
    raise JobRefused(
        job.job,
        f"incidence {incidence_deg:g} deg in mount {mount + 1} needs the stage at "
        f"{wanted:g} deg; its travel is {stage.travel_min_deg:g} to "
        f"{stage.travel_max_deg:g} deg, {stage.approach_deg:g} deg of it to approach",
        "narrow start_deg/stop_deg, or change mounts_deg in the recipe",
    )


def _in_travel(stage: Stage, value_deg: float) -> bool:
    low = value_deg - stage.approach_deg
    return low >= stage.travel_min_deg and value_deg <= stage.travel_max_deg


def refuse_without_orders(job: Job, grid_deg: tuple[float, ...]) -> None:
    """Raises JobRefused for a laser with which no order but zero is ever seen.

    Every part of a lot must show one.
    """
    for laser, part in product(job.recipe.lasers, job.parts):
        view = visible_orders(job.bench, part, laser, grid_deg)
        if not view.any_but_zero():
            why = why_no_order(job.bench, part, laser, grid_deg)
            raise JobRefused(
                job.job,
                f"laser '{laser}' on {part.nominal_pitch_nm:g} nm: {why}",
                remedy_of_no_order(job.bench, part, laser),
            )


def _zero_check_or_refuse(job: Job, part: Part, grid_deg: tuple[float, ...]) -> float:
    check_deg = zero_check_incidence_deg(job.bench, part, grid_deg)
    if check_deg is None:
        raise JobRefused(
            job.job,
            "at no step is the zero order predicted on the screen and off the hole, "
            "so the zero order cannot be watched",
            "let the recipe pass angles at which it is (twice the incidence)",
        )
    return check_deg


def _zero_checks(
    job: Job, check_deg: Sequence[float], steps: list[Step], first_frame: int
) -> tuple[Step, ...]:
    starts: dict[tuple[int, str], Step] = {}
    for step in steps:
        starts.setdefault((step.mount, step.laser), step)
    return tuple(
        Step(
            step=len(steps) + number,
            kind="zero-check",
            mount=start.mount,
            mount_deg=start.mount_deg,
            laser=start.laser,
            incidence_deg=check_deg[start.part],
            stage_deg=reachable_stage_deg(job, start.mount, check_deg[start.part]),
            exposures_ms=start.exposures_ms,
            dark_due=False,
            planned_s=start.planned_s,
            first_frame=first_frame,
            face_deg=start.face_deg,
            part=start.part,
        )
        for number, start in enumerate(starts.values())
    )
