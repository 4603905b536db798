"""The last look at a job before its bench is opened: refuse or return. Pure."""

from pitchsweep.configs.job_model import Job
from pitchsweep.safety.beam_map import beam_map, refusals
from pitchsweep.safety.refusals import Refusal, refuse_outright
from pitchsweep.safety.safety_errors import GateRefused


def why_refused(job: Job) -> tuple[Refusal, ...]:
    """Every refusal of ``job``: outright ones first; then those of its beam map.

    The beam map is not asked where something is refused outright, since its figures
    may not hold there.
    """
    return refuse_outright(job) or refusals(beam_map(job))


def refuse_unsafe(job: Job) -> None:
    """Returns if nothing stands against light; raises GateRefused with the first."""
    found = why_refused(job)
    if not found:
        return
    more = f" (and {len(found) - 1} more like it)" if len(found) > 1 else ""
    raise GateRefused(found[0].what + more, found[0].remedy)
