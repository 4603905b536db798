"""Which lasers of a bench may be alight at once, and how strong together. Pure.

A unit has one line: it switches whatever is on behind it and cannot tell which laser
that is. So all lasers of the bench count together, wherever more than one might be on,
unless the bench file declares that a selector or the wiring lets only one through.
"""

from pitchsweep.configs.job_model import Job
from pitchsweep.safety.hazard_figures import full_drive_mw


def lasers_alight(job: Job) -> tuple[str, ...]:
    """The lasers that light may come from: the recipe's first, in its order."""
    named = tuple(job.recipe.lasers)
    if job.bench.emission.lasers_at_once == "one":
        return named
    return tuple(dict.fromkeys((*named, *job.bench.lasers)))


def may_be_together(job: Job) -> bool:
    """Whether more than one of them may be alight at the same time."""
    return job.bench.emission.lasers_at_once == "all" and len(job.bench.lasers) > 1


def strongest_mw(job: Job) -> float:
    """The highest power at full drive: of all together, or of the strongest one."""
    powers = [full_drive_mw(job.bench.lasers[name]) for name in lasers_alight(job)]
    return sum(powers) if may_be_together(job) else max(powers)


def at_once_in_words(job: Job) -> str:
    """What signers are told of it."""
    if len(job.bench.lasers) == 1:
        return "the bench has one laser"
    if not may_be_together(job):
        return (
            "one laser at a time: the bench file declares it"
            " (emission.lasers_at_once: one), the unit cannot tell which one is on"
        )
    return (
        f"{' + '.join(lasers_alight(job))} may be alight together,"
        f" {strongest_mw(job):.3g} mW in all: every stop must bear the sum"
    )
