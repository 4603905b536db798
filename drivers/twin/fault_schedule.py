"""Faults on schedule: at the n-th occasion of something, do this (pure)."""

from collections import Counter
from collections.abc import Iterable, Mapping
from dataclasses import asdict, dataclass
from typing import Any

from pitchsweep.configs.twin_faults import ACTIONS_AT, TwinFault


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

    def seen(self) -> dict[str, int]:
        """How often each occasion came so far, for ``go_on_from``."""
        return dict(self._seen)

    def go_on_from(self, seen: Mapping[str, int]) -> None:
        """Counts on from what an earlier process of the same twin has seen."""
        self._seen.update(seen)

    @classmethod
    def from_json(cls, rows: Iterable[Mapping[str, Any]]) -> "FaultSchedule":
        """The schedule of rows made by ``Fault.to_json``."""
        return cls(Fault(**row) for row in rows)

    def and_also(self, faults: Iterable[TwinFault]) -> "FaultSchedule":
        """This schedule with the faults that a bench file declares after its own."""
        declared = (Fault(**fault.model_dump()) for fault in faults)
        return FaultSchedule((*self._faults, *declared))

    def due(self, at: str) -> Fault | None:
        """The fault for this occasion of ``at``, which is hereby counted."""
        self._seen[at] += 1
        count = self._seen[at]
        for fault in self._faults:
            if fault.at == at and fault.nth <= count < fault.nth + fault.times:
                return fault
        return None
