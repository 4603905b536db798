"""Which settings a sign-off is bound to: all of them, but for a short list. Pure.

A setting that somebody adds later is bound at once; what may change freely after a
sign-off stands in ``NOT_BOUND`` with its reason.
"""

import hashlib
import json
import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from fnmatch import fnmatchcase
from types import MappingProxyType
from typing import Any

from pitchsweep.configs.checklist_model import Checklist
from pitchsweep.configs.job_model import Job

NOT_BOUND: Mapping[str, str] = MappingProxyType(
    {
        "bench.note": "words for people",
        "part.note": "words for people",
        "recipe.note": "words for people",
        "checklist.note": "words for people",
        "bench.twin.*": "a simulated bench emits nothing; that it is one is bound",
        "bench.air.*": "turns angles into pitch, after the light",
        "bench.drift.*": "weighs spots, after the light",
        "bench.lasers.*.u_drift_pm": "weighs spots, after the light",
        "bench.lasers.*.u_jump_pm": "weighs spots, after the light",
        "bench.lasers.*.may_jump": "weighs spots, after the light",
        "bench.lasers.*.wavelength_due": "a date that is only told",
        "bench.reading_u_mm": "weighs spots, after the light",
        "bench.camera.bits": "how frames are read, after the light",
        "bench.camera.gain_dn_per_e": "how frames are read, after the light",
        "bench.camera.read_noise_e": "how frames are read, after the light",
        "bench.camera.black_level_dn": "how frames are read, after the light",
        "part.tolerance*": "judges the pitch, after the light",
        "part.certified*": "judges the pitch, after the light",
        "part.material.*": "turns pitch to 20 C, after the light",
        "recipe.coverage": "states the uncertainty, after the light",
    }
)
"""Pattern of dotted paths -> why a sign-off does not depend on them."""

OF_LOT = re.compile(r"^lot\[[0-9]+\]")
"""Every part of a lot is bound like the part of a job."""


@dataclass(frozen=True)
class Change:
    """A bound setting that is not what was signed; None where there was or is none."""

    path: str
    was: object
    now: object

    def __str__(self) -> str:
        return f"{self.path} was {_shown(self.was)}, is {_shown(self.now)}"


def bound_settings(job: Job, checklist: Checklist) -> dict[str, object]:
    """Dotted path -> JSON value of every setting that a sign-off is bound to.

    ``simulated`` says whether the bench is a twin.
    """
    values: dict[str, Any] = {
        "bench": job.bench.model_dump(mode="json"),
        "part": job.part.model_dump(mode="json"),
        "recipe": job.recipe.model_dump(mode="json"),
        "checklist": checklist.model_dump(mode="json"),
        "simulated": job.bench.twin is not None,
    }
    if job.lot:
        values["lot"] = [part.model_dump(mode="json") for part in job.lot]
    leaves = dict(_leaves(values, ""))
    return {path: leaves[path] for path in sorted(leaves) if is_bound(path)}


def is_bound(path: str) -> bool:
    """False for a path that ``NOT_BOUND`` lists."""
    of_part = OF_LOT.sub("part", path)
    return not any(fnmatchcase(of_part, pattern) for pattern in NOT_BOUND)


def settings_sha256(settings: Mapping[str, object]) -> str:
    """64 hexadecimal digits over every path and value of ``settings``."""
    text = json.dumps(
        dict(settings), sort_keys=True, separators=(",", ":"), allow_nan=False
    )
    return hashlib.sha256(text.encode("ascii")).hexdigest()


def changes(was: Mapping[str, object], now: Mapping[str, object]) -> tuple[Change, ...]:
    """Every path whose value differs, sorted; the empty tuple when none does."""
    paths = sorted(set(was) | set(now))
    return tuple(
        Change(path, was.get(path), now.get(path))
        for path in paths
        if (path in was) != (path in now) or was.get(path) != now.get(path)
    )


def _leaves(value: Any, path: str) -> Iterator[tuple[str, object]]:
    """Scalars, and lists of scalars as one; an empty block is a leaf itself."""
    if isinstance(value, dict) and value:
        for key, inner in value.items():
            yield from _leaves(inner, f"{path}.{key}" if path else str(key))
    elif isinstance(value, list) and any(isinstance(v, dict | list) for v in value):
        for index, inner in enumerate(value):
            yield from _leaves(inner, f"{path}[{index}]")
    else:
        # Negative zero equals zero and must not look different.
        yield path, value + 0.0 if isinstance(value, float) else value


def _shown(value: object) -> str:
    if value is None:
        return "nothing"
    text = value if isinstance(value, str) else json.dumps(value)
    return text if len(text) <= 60 else text[:57] + "..."
