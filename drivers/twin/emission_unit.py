"""The simulated unit's light, door, shutter and reset button (real clock only).

The unit does not cut the light when its door opens: the door is a monitored contact,
so that what is measured is the guard's own reaction. It goes dark by itself only when
no keep-alive arrives in time.
"""

import threading
import time
from collections.abc import Callable

from pitchsweep.drivers.twin.unit_log import UnitLog


class EmissionUnit:
    """Light held by keep-alive, door contact, shutter position, reset counter."""

    def __init__(
        self,
        log: UnitLog,
        *,
        keep_alive_s: float,
        has_shutter: bool,
        clock: Callable[[], float] = time.monotonic,
    ) -> None:
        self.keep_alive_s = keep_alive_s
        self._log = log
        self._has_shutter = has_shutter
        self._clock = clock
        self._lock = threading.Lock()
        self._lit = False
        self._lit_until_s = 0.0
        self._stuck = False
        self._door_closed = True
        self._resets = 0
        self._lapses = 0

    def keep(self) -> None:
        """Lights up, or stays lit for one more keep-alive time."""
        with self._lock:
            self._lapse_if_due()
            self._lit_until_s = self._clock() + self.keep_alive_s
            if not self._lit:
                self._lit = True
                self._log.write("light", "on", "keep-alive")

    def dark(self, why: str = "asked") -> None:
        """Goes dark, unless stuck."""
        with self._lock:
            self._lapse_if_due()
            self._lit_until_s = 0.0
            if self._lit and not self._stuck:
                self._lit = False
                self._log.write("light", "off", why)

    def lapse_due_in_s(self) -> float | None:
        """Goes dark when the keep-alive has run out; seconds left, None when dark."""
        with self._lock:
            self._lapse_if_due()
            if not self._lit or self._stuck:
                return None
            return max(self._lit_until_s - self._clock(), 0.0)

    def is_lit(self) -> bool:
        """Whether light comes out now."""
        with self._lock:
            self._lapse_if_due()
            return self._lit

    def stick(self) -> None:
        """Fault: the light can no longer be taken away."""
        with self._lock:
            self._stuck = True
            self._log.write("shutter", "stuck", "fault on schedule")

    def set_door(self, closed: bool) -> None:
        """The person on the spot closes or opens the door."""
        with self._lock:
            if closed != self._door_closed:
                self._door_closed = closed
                self._log.write("door", "closed" if closed else "open", "person")

    def press_reset(self) -> None:
        """The person on the spot presses the reset button."""
        with self._lock:
            self._resets += 1
            self._log.write("reset", str(self._resets), "person")

    def standing(self) -> str:
        """The line that every answer about the light carries."""
        with self._lock:
            self._lapse_if_due()
            clear = self._lit or not self._has_shutter
            return (
                f"LIGHT {'LIT' if self._lit else 'DARK'}"
                f" DOOR {'SHUT' if self._door_closed else 'AJAR'}"
                f" SHUTTER {'CLEAR' if clear else 'SHUT'}"
                f" RESETS {self._resets} LAPSES {self._lapses}"
            )

    def _lapse_if_due(self) -> None:
        if self._lit and not self._stuck and self._clock() >= self._lit_until_s:
            self._lit = False
            self._lapses += 1
            self._log.write("light", "off", "keep-alive ran out")
