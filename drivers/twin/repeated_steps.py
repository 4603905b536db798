"""Fresh noise for repeated steps: which attempt at a step this is (acts: one file).

Usually a repeated step sees the same noise, so that an interrupted run ends like one
left alone. Real noise does not come again; with ``repeated_noise: fresh`` it does not
here either, and what must agree then are the results within their uncertainty.
"""

import json
from dataclasses import replace
from pathlib import Path

from pitchsweep.drivers.devices import Label

SEEN = "exposed.jsonl"
APART = 1_000_000
"""Between the noise of one attempt and of the next, counted in repeats."""

Key = tuple[int, str, int, int]


class RepeatedSteps:
    """Counts attempts at every step over all processes of a run's twin.

    A step is attempted again when an exposure of it comes that has been. The file is
    not synced: it need outlive a killed process, not a power cut.
    """

    def __init__(self, directory: Path) -> None:
        self._path = directory / SEEN
        self._attempts: dict[Key, int] = {}
        self._seen: dict[Key, set[int]] = {}
        text = self._path.read_text("utf-8") if self._path.exists() else ""
        for line in text.split("\n")[:-1]:  # whole lines only
            mount, laser, repeat, step, exposure = json.loads(line)
            self._count((mount, laser, repeat, step), exposure)

    def fresh(self, label: Label) -> Label:
        """``label`` as a key of noise, another one for every attempt at its step."""
        key = (label.mount, label.laser, label.repeat, label.step)
        with self._path.open("a", encoding="utf-8") as file:
            file.write(json.dumps([*key, label.exposure]) + "\n")
        attempt = self._count(key, label.exposure)
        return replace(label, repeat=label.repeat + APART * attempt)

    def _count(self, key: Key, exposure: int) -> int:
        seen = self._seen.setdefault(key, set())
        if exposure in seen:
            self._attempts[key] = self._attempts.get(key, 0) + 1
            seen.clear()
        seen.add(exposure)
        return self._attempts.get(key, 0)
