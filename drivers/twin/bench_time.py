"""Bench time, owned by the twin (acts).

At rehearsal speed it is a number that advances only by waits that are asked for; at
real speed it runs with the monotonic clock and a wait sleeps. Never used for safety.
"""

import threading
import time
from typing import Literal


class BenchTime:
    """Bench time in seconds, starting at ``start_s``."""

    def __init__(self, start_s: float, speed: Literal["rehearsal", "real"]) -> None:
        self._real = speed == "real"
        self._offset_s = start_s - (time.monotonic() if self._real else 0.0)
        self._lock = threading.Lock()

    def now_s(self) -> float:
        """The bench time."""
        return self._offset_s + (time.monotonic() if self._real else 0.0)

    @property
    def is_real(self) -> bool:
        """Whether it runs with the monotonic clock."""
        return self._real

    def wait_until(self, bench_s: float) -> None:
        """Lets pass what is left until ``bench_s``."""
        left_s = bench_s - self.now_s()
        if left_s > 0.0:
            self.wait(left_s)

    def wait(self, seconds: float) -> float:
        """Lets ``seconds`` (0 or more) pass; returns the bench time then."""
        if not seconds >= 0.0:
            raise ValueError(f"wait of {seconds} s: 0 or more")
        if self._real:
            time.sleep(seconds)
        else:
            with self._lock:
                self._offset_s += seconds
        return self.now_s()
