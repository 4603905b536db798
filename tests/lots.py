"""A lot for the tests: the shipped one, coarser, and lots of other parts."""

from typing import Any

from pitchsweep.configs.job_model import Job
from pitchsweep.configs.part_model import Part
from pitchsweep.configs.reader import read_job

DEMO = "demo:lot-ratio"


def lot_job(**recipe: Any) -> Job:
    """The shipped lot (reference, shim 7, shim 8, reference) with another recipe."""
    job = read_job(DEMO).job
    return job.model_copy(update={"recipe": job.recipe.model_copy(update=recipe)})


def job_with_lot(job: Job, *lot: Part) -> Job:
    """``job`` with these parts; validated, about the first that is not certified."""
    about = next(part for part in lot if part.certified is None)
    values = {name: getattr(job, name) for name in type(job).model_fields}
    return Job.model_validate({**values, "part": about, "lot": lot})
