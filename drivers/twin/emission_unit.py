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
    """Light held by keep-alive, door contacts, shutter position, reset counter.

    With ``channels`` 2 the door has a second contact, read and set apart.
    """

    def __init__(
        self,
        log: UnitLog,
        *,
        keep_alive_s: float,
        has_shutter: bool,
        channels: int = 1,
        clock: Callable[[], float] = time.monotonic,
    ) -> None:
        self.keep_alive_s = keep_alive_s
        self._log = log
        self._has_shutter = has_shutter
        self._clock = clock
        self._lock = threading.Lock()
        self._lit = False
        self._lit_until_s = 0.0
        self._tried_until_s: float | None = None
        self._stuck = False
        self._jammed = False
        self._closed = {number: True for number in range(1, channels + 1)}
        self._resets = 0
        self._lapses = 0
        self._ticket = 0
        self._ticket_s = float("-inf")

    def light_up(self, ticket: int) -> bool:
        """Lights up for one keep-alive time; False for any but a fresh last ticket."""
        with self._lock:
            fresh = self._clock() - self._ticket_s <= self.keep_alive_s
            if ticket != self._ticket or not fresh:
                return False
        self.energise()
        return True

    def keep(self) -> bool:
        """Stays lit for one more keep-alive time; False in the dark."""
        if not self.is_lit():
            return False
        self.energise()
        return True

    def energise(self, for_s: float | None = None) -> None:
        """Lights up, or stays lit for ``for_s`` more (None: one keep-alive time)."""
        with self._lock:
            self._lapse_if_due()
            self._tried_until_s = None
            stays_s = self.keep_alive_s if for_s is None else for_s
            self._lit_until_s = self._clock() + stays_s
            if not self._lit:
                self._lit = True
                self._log.write("light", "on", "keep-alive")

    def try_time_out(self) -> bool:
        """Lets the keep-alive time run once without light; False while lit."""
        with self._lock:
            self._lapse_if_due()
            if self._lit:
                return False
            self._tried_until_s = self._clock() + self.keep_alive_s
            self._log.write("time-out", "tried", "shutter held shut")
            return True

    def dark(self, why: str = "asked") -> None:
        """Goes dark, unless stuck."""
        with self._lock:
            self._lapse_if_due()
            self._lit_until_s = 0.0
            self._tried_until_s = None
            if self._lit and not self._stuck:
                self._lit = False
                self._log.write("light", "off", why)

    def lapse_due_in_s(self) -> float | None:
        """Goes dark when the keep-alive has run out; seconds left, None when dark."""
        with self._lock:
            self._lapse_if_due()
            if self._tried_until_s is not None:
                return max(self._tried_until_s - self._clock(), 0.0)
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

    def jam_shutter(self) -> None:
        """Fault: the shutter stays clear whatever is asked; its contact says so."""
        with self._lock:
            self._stuck = self._jammed = True
            self._log.write("shutter", "stuck", "fault on schedule")

    def set_door(self, closed: bool, channel: int | None = None) -> None:
        """The person on the spot closes or opens the door, or one contact of it."""
        with self._lock:
            before = dict(self._closed)
            for number in self._closed if channel is None else (channel,):
                if number in self._closed:
                    self._closed[number] = closed
            if self._closed != before:
                why = "person" if channel is None else f"channel {channel} only"
                self._log.write("door", "closed" if closed else "open", why)

    def interlock(self) -> tuple[bool, bool | None]:
        """Whether each contact is closed; None for a second one that is not there."""
        with self._lock:
            return self._closed[1], self._closed.get(2)

    def note_person(self, does: str) -> None:
        """Somebody is "asked" to the bench, or has "done" what was asked."""
        self._log.write("person", does)

    def press_reset(self) -> None:
        """The person on the spot presses the reset button."""
        with self._lock:
            self._resets += 1
            self._log.write("reset", str(self._resets), "person")

    def resets(self) -> int:
        """How often the reset button was pressed."""
        with self._lock:
            return self._resets

    def standing(self) -> str:
        """The line that every answer about the light carries."""
        with self._lock:
            self._lapse_if_due()
            clear = self._lit or not self._has_shutter
            held = self._lit and not (
                self._jammed and self._clock() >= self._lit_until_s
            )
            second = self._closed.get(2)
            self._ticket += 1
            self._ticket_s = self._clock()
            return (
                f"LIGHT {'LIT' if held else 'DARK'}"
                f" DOOR {_contact(self._closed[1])}"
                f" SECOND {'ABSENT' if second is None else _contact(second)}"
                f" SHUTTER {'CLEAR' if clear else 'SHUT'}"
                f" RESETS {self._resets} LAPSES {self._lapses}"
                f" TICKET {self._ticket}"
            )

    def _lapse_if_due(self) -> None:
        now_s = self._clock()
        if self._tried_until_s is not None and now_s >= self._tried_until_s:
            self._tried_until_s = None
            self._lapses += 1
            self._log.write("time-out", "shown", "keep-alive ran out, stayed dark")
        if self._lit and not self._stuck and now_s >= self._lit_until_s:
            self._lit = False
            self._lapses += 1
            self._log.write("light", "off", "keep-alive ran out")


def _contact(closed: bool) -> str:
    return "SHUT" if closed else "AJAR"
