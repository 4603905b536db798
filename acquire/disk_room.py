"""Is there room for the frames to come? (pure, but for ``free_bytes``)."""

import os
from pathlib import Path

from pitchsweep.acquire.sweep_plan import Step, SweepPlan, frames_of
from pitchsweep.configs.job_model import Job

BYTES_PER_PIXEL = 2.05
"""A 16-bit frame takes no more, coded or not."""
JOURNAL_BYTES = 20_000_000
STEPS_IN_HAND = 4


def free_bytes(folder: Path) -> int:
    """Free bytes for this user on the disk of ``folder``. Raises OSError."""
    found = os.statvfs(folder)
    return found.f_bavail * found.f_frsize


def frame_bytes(job: Job) -> float:
    """What a stored frame takes; nothing where spots are recorded."""
    if job.recipe.record != "frames":
        return 0.0
    return BYTES_PER_PIXEL * job.bench.camera.width_px * job.bench.camera.height_px


def why_too_small(job: Job, frames_left: int, free: int) -> str | None:
    """None when ``frames_left`` frames and the journal fit into ``free`` bytes."""
    needed = frames_left * frame_bytes(job) + JOURNAL_BYTES
    if free >= needed:
        return None
    return f"{free / 1e9:.2f} GB are free, the sweep needs up to {needed / 1e9:.2f} GB"


def why_nearly_full(job: Job, step: Step, free: int) -> str | None:
    """None while a few steps more fit into ``free`` bytes."""
    needed = STEPS_IN_HAND * frames_of(step) * frame_bytes(job) + JOURNAL_BYTES / 20
    if free >= needed:
        return None
    return f"only {free / 1e6:.1f} MB are free"


def frames_left(plan: SweepPlan, remaining: tuple[Step, ...]) -> int:
    """How many frames the remaining steps make, zero checks included."""
    checks = sum(len(check.exposures_ms) for check in plan.zero_checks)
    return sum(frames_of(step) for step in remaining) + checks
