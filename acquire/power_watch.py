"""Reads the power at the part while there is light, for the heartbeat. Acts (thread).

Its own thread and its own line to the sensor: a slow sensor must not hold up the
heartbeat. A sensor that says nothing lets the last reading grow old, which trips.
"""

import threading
from collections.abc import Callable
from contextlib import suppress
from typing import Self

from pitchsweep.drivers.driver_errors import DriverError
from pitchsweep.safety.safety_errors import SafetyError

PERIOD_S = 0.05


class PowerWatch:
    """``read`` gives the power in mW, ``tell`` takes it; between ``lit`` and ``dark``.

    Reads once, in the caller's own thread, when light begins: no step is too short for
    that. Then every 50 ms.
    """

    def __init__(
        self, read: Callable[[str], float], tell: Callable[[float], None]
    ) -> None:
        self._read = read
        self._tell = tell
        self._laser = ""
        self._lit = threading.Event()
        self._ending = threading.Event()
        self._thread = threading.Thread(target=self._work, name="power", daemon=True)

    def __enter__(self) -> Self:
        self._thread.start()
        return self

    def __exit__(self, *_: object) -> None:
        self._ending.set()
        self._lit.set()
        self._thread.join(PERIOD_S)

    def lit(self, laser: str) -> None:
        """Light of ``laser`` has begun. Raises what ``tell`` raises."""
        self._laser = laser
        self._read_once()
        self._lit.set()

    def dark(self) -> None:
        """Light has ended; waits for no reading that is still under way."""
        self._lit.clear()

    def _work(self) -> None:
        while self._lit.wait() and not self._ending.is_set():
            self._ending.wait(PERIOD_S)
            if self._lit.is_set() and not self._ending.is_set():
                with suppress(SafetyError):
                    # Whoever asked for light meets the same trip.
                    self._read_once()

    def _read_once(self) -> None:
        # Told nothing, the guard trips when the last reading is too old.
        with suppress(DriverError):
            self._tell(self._read(self._laser))
