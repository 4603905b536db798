"""What the twin keeps between its processes: ``state.json`` (acts)."""

import json
import os
from dataclasses import dataclass, field
from pathlib import Path

from pitchsweep.drivers.twin.stage_mechanics import Rest, rest_from_json, rest_to_json


@dataclass(frozen=True)
class KeptState:
    """The stage as it stood, the bench time, and what faults have done so far.

    ``seen`` counts the occasions of the fault schedule.
    """

    stage: Rest
    bench_s: float
    seen: dict[str, int] = field(default_factory=dict)
    laser_shift_pm: float = 0.0
    laser_power: float = 1.0


def read_state(path: Path) -> KeptState | None:
    """The kept state, or None where there is none."""
    if not path.exists():
        return None
    values = json.loads(path.read_text(encoding="utf-8"))
    return KeptState(**{**values, "stage": rest_from_json(values["stage"])})


def write_state(path: Path, state: KeptState) -> None:
    """Replaces ``path`` durably: whole old or whole new, whatever happens."""
    values = {**vars(state), "stage": rest_to_json(state.stage)}
    text = json.dumps(values, indent=1) + "\n"
    write_durably(path, text.encode("utf-8"))


def write_durably(path: Path, data: bytes) -> None:
    """Writes beside ``path``, syncs, and renames over it."""
    beside = path.with_name(path.name + ".new")
    with beside.open("wb") as file:
        file.write(data)
        file.flush()
        os.fsync(file.fileno())
    beside.replace(path)
    folder = os.open(path.parent, os.O_RDONLY)
    try:
        os.fsync(folder)
    finally:
        os.close(folder)
