"""Shows how a sweep goes, on stderr only. This module acts (terminal)."""

from dataclasses import dataclass
from typing import Any, Protocol

LINES = 10
"""About so many lines a sweep."""


@dataclass(frozen=True)
class StepShown:
    """What is shown after each step kept; ``left_s`` is bench time."""

    done: int
    total: int
    incidence_deg: float
    mount: int
    laser: str
    spots: int
    orders_expected: int
    gate: str
    left_s: float
    part: str = ""

    def text(self) -> str:
        """One line for a log."""
        return (
            f"{self.done} of {self.total} steps, {self.incidence_deg:+.2f} deg, "
            f"{f'{self.part}, ' if self.part else ''}mount "
            f"{self.mount + 1}, {self.laser}, orders {self.spots} (of "
            f"{self.orders_expected} expected), gate {self.gate}, "
            f"{clock_text(self.left_s)} left"
        )


class Progress(Protocol):
    """Something that shows a sweep; ``show`` may come from any thread."""

    def say(self, text: str) -> None: ...

    def show(self, shown: StepShown) -> None: ...

    def end(self) -> None: ...


def clock_text(seconds: float) -> str:
    """h:mm:ss of a duration."""
    whole = max(0, round(seconds))
    return f"{whole // 3600}:{whole // 60 % 60:02d}:{whole % 60:02d}"


class LineProgress:
    """For logs: what is said, and a line about every tenth of the way."""

    def __init__(self, stream: Any) -> None:
        self._stream = stream
        self._next = 0

    def say(self, text: str) -> None:
        print(text, file=self._stream, flush=True)

    def show(self, shown: StepShown) -> None:
        if LINES * shown.done >= self._next or shown.done == shown.total:
            self.say(shown.text())
            self._next = LINES * shown.done + shown.total

    def end(self) -> None:
        """Nothing is left on the screen."""


class BarProgress:
    """For a terminal: a bar with step, angle, orders, gate and bench time left."""

    def __init__(self, stream: Any) -> None:
        from rich.console import Console
        from rich.progress import BarColumn, TextColumn
        from rich.progress import Progress as Bar

        self._console = Console(file=stream)
        self._bar = Bar(
            TextColumn("{task.completed} of {task.total} steps"),
            BarColumn(bar_width=24),
            TextColumn("{task.description}"),
            console=self._console,
            transient=True,
        )
        self._task: Any = None

    def say(self, text: str) -> None:
        self._console.print(text, highlight=False, markup=False)

    def show(self, shown: StepShown) -> None:
        text = (
            f"{shown.incidence_deg:+6.2f} deg  mount {shown.mount + 1}  {shown.laser}  "
            f"{f'{shown.part}  ' if shown.part else ''}"
            f"orders {shown.spots}/{shown.orders_expected}  gate {shown.gate}  "
            f"{clock_text(shown.left_s)} left"
        )
        if self._task is None:
            self._bar.start()
            self._task = self._bar.add_task(text, total=shown.total)
        self._bar.update(self._task, completed=shown.done, description=text)

    def end(self) -> None:
        self._bar.stop()


def progress_for(stream: Any) -> Progress:
    """A bar where ``stream`` is a terminal, lines elsewhere."""
    return BarProgress(stream) if stream.isatty() else LineProgress(stream)
