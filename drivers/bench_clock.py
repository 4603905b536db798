"""Bench time on a real bench: the monotonic clock, counted from the run (acts)."""

import time
from collections.abc import Callable

LONGEST_SLEEP_S = 0.1


class MonotonicBenchClock:
    """A BenchClock that sleeps. ``check`` is called while it waits and may raise.

    ``start_s`` is the bench time now, so that a resumed run goes on counting.
    """

    def __init__(
        self,
        start_s: float = 0.0,
        *,
        check: Callable[[], None] = lambda: None,
        now: Callable[[], float] = time.monotonic,
        sleep: Callable[[float], None] = time.sleep,
    ) -> None:
        self._now = now
        self._sleep = sleep
        self._check = check
        self._offset_s = start_s - now()

    def now_s(self) -> float:
        """Bench time."""
        return self._offset_s + self._now()

    def wait(self, seconds: float) -> None:
        """Sleeps for ``seconds``; what ``check`` raises ends it sooner."""
        until_s = self._now() + seconds
        while (left_s := until_s - self._now()) > 0.0:
            self._sleep(min(left_s, LONGEST_SLEEP_S))
            self._check()
