"""The simulated time-out relay: edges and levels in, contacts out (real clock only).

It closes at the third rising edge of a train of 5 to 20 Hz and opens when no further
edge comes for the keep-alive time. Light passes while it is closed *and* let through.
"""

import threading
import time
from collections.abc import Callable

from pitchsweep.drivers.twin.emission_unit import EmissionUnit

EDGES_TO_CLOSE = 3
SHORTEST_S, LONGEST_S = 0.04, 0.25
RING_S = 0.3
"""How long the reset input shows a press."""


class TimeOutRelay:
    """Shaped like a serial port, as the port server wants it; drives ``unit``.

    ``rts`` carries the pulses, ``dtr`` lets light through; ``cts`` interlock, ``dsr``
    mirror contact, ``cd`` second interlock channel, ``ri`` reset input.
    """

    def __init__(
        self, unit: EmissionUnit, clock: Callable[[], float] = time.monotonic
    ) -> None:
        self.baudrate, self.bytesize, self.stopbits = 115200, 8, 1
        self.parity = "N"
        self.xonxoff = self.rtscts = self.break_condition = False
        self._unit = unit
        self._clock = clock
        self._lock = threading.Lock()
        self._level = False
        self._through = False
        self._edges = 0
        self._edge_s = float("-inf")
        self._closed_until_s = float("-inf")
        self._resets = unit.resets()
        self._rings_until_s = float("-inf")

    @property
    def rts(self) -> bool:
        """The level of the pulse line."""
        return self._level

    @rts.setter
    def rts(self, level: bool) -> None:
        with self._lock:
            rises = level and not self._level
            self._level = level
            if rises:
                self._edge()

    @property
    def dtr(self) -> bool:
        """Whether light is let through."""
        return self._through

    @dtr.setter
    def dtr(self, level: bool) -> None:
        with self._lock:
            self._through = level
            left_s = self._closed_until_s - self._clock()
            if not level:
                self._unit.dark("no longer let through")
            elif left_s > 0.0:
                self._unit.energise(left_s)

    @property
    def cts(self) -> bool:
        """The interlock contact."""
        return self._unit.interlock()[0]

    @property
    def dsr(self) -> bool:
        """The mirror contact."""
        return self._clock() < self._closed_until_s

    @property
    def cd(self) -> bool:
        """The second interlock channel; open where there is none."""
        return self._unit.interlock()[1] is True

    @property
    def ri(self) -> bool:
        """The reset input, for a moment after each press."""
        resets, now_s = self._unit.resets(), self._clock()
        if resets != self._resets:
            self._resets, self._rings_until_s = resets, now_s + RING_S
        return now_s < self._rings_until_s

    def look(self) -> None:
        """Lets the light lapse when that is due."""
        self._unit.lapse_due_in_s()

    def hang_up(self) -> None:
        """The line is gone: both outputs fall."""
        self.dtr = False
        self.rts = False

    def reset_input_buffer(self) -> None:
        """Nothing is kept."""

    def reset_output_buffer(self) -> None:
        """Nothing is kept."""

    def _edge(self) -> None:
        now_s = self._clock()
        since_s, self._edge_s = now_s - self._edge_s, now_s
        in_train = SHORTEST_S <= since_s <= LONGEST_S
        self._edges = self._edges + 1 if in_train else 1
        if self._edges < EDGES_TO_CLOSE and now_s >= self._closed_until_s:
            return
        if not in_train:
            return
        self._closed_until_s = now_s + self._unit.keep_alive_s
        if self._through:
            self._unit.energise()
