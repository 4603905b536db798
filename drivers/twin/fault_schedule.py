"""Faults on schedule: at the n-th occasion of something, do this (pure)."""

from collections import Counter
from collections.abc import Iterable, Mapping
from dataclasses import asdict, dataclass
from typing import Any

ACTIONS_AT: dict[str, tuple[str, ...]] = {
    "stage-ask": ("silent", "garbage", "late"),
    "stage-move": ("stall", "wrong-place", "zero-lost"),
    "unit-ask": ("silent", "garbage", "late"),
    "unit-keep": (
        "silent",
        "light-stuck",
        "shutter-stuck",
        "door-opens",
        "one-channel-opens",
    ),
    "exposure": ("refused",),
}


@dataclass(frozen=True)
class Fault:
    """At occasions number ``nth`` to ``nth + times - 1`` (from 1) of ``at``: ``does``.

    ``late_s`` is how late a late answer comes, on the real clock.
    """

    at: str
    nth: int
    does: str
    times: int = 1
    late_s: float = 0.5

    def __post_init__(self) -> None:
        if self.does not in ACTIONS_AT.get(self.at, ()):
            raise ValueError(f"fault '{self.does}' at '{self.at}': not in {ACTIONS_AT}")
        if self.nth < 1 or self.times < 1:
            raise ValueError(f"fault nth {self.nth}, times {self.times}: from 1")

    def to_json(self) -> dict[str, Any]:
        """Plain values, for ``Fault(**values)``."""
        return asdict(self)


class FaultSchedule:
    """Counts occasions and says which fault is due."""

    def __init__(self, faults: Iterable[Fault] = ()) -> None:
        self._faults = tuple(faults)
        self._seen: Counter[str] = Counter()

    @classmethod
    def from_json(cls, rows: Iterable[Mapping[str, Any]]) -> "FaultSchedule":
        """The schedule of rows made by ``Fault.to_json``."""
        return cls(Fault(**row) for row in rows)

    def due(self, at: str) -> Fault | None:
        """The fault for this occasion of ``at``, which is hereby counted."""
        self._seen[at] += 1
        count = self._seen[at]
        for fault in self._faults:
            if fault.at == at and fault.nth <= count < fault.nth + fault.times:
                return fault
        return None
