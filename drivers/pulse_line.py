"""A time-out relay fed with pulses, in the shape of the emission client (acts).

Wiring: RTS carries the pulses, DTR lets the relay's contact through to the light (both
are needed; either alone is dark), CTS is the interlock contact, DSR the relay's own
mirror contact, CD a second interlock channel, RI the reset input. The relay closes at
the third rising edge of a train of 5 to 20 Hz and opens when no edge comes for its
time, so that RTS rising when a port is opened means no light. Each ``keep_lit`` is half
a pulse, sent from the guard's tick after all its checks.

A relay says nothing of itself. Identity and challenge are asked for in the dialect on
the data wires of the same port: a box with a controller answers, the twin's relay too.
A bare relay stays silent and is refused, as a rehearsal and otherwise.
"""

import time
from collections.abc import Callable

from pitchsweep.drivers.dialect import Dialect
from pitchsweep.drivers.driver_errors import DeviceRefused
from pitchsweep.drivers.emission_client import UnitState
from pitchsweep.drivers.line_client import LineClient
from pitchsweep.drivers.modem_port import Contacts, ModemPort, open_modem_port

TRAIN_HALVES = 6
HALF_PULSE_S = 0.045
ASK_TIMEOUT_S = 0.5
"""Identity and challenge are asked in the dark only; they may take longer."""


class PulseLineClient:
    """Asks a pulse-fed relay for light; every answer comes from its contacts.

    ``reset_count`` and ``lapse_count`` of the state are counted here: presses seen on
    the reset input, and openings of the mirror contact that nobody asked for.
    """

    def __init__(
        self,
        port: ModemPort,
        line: LineClient,
        *,
        device: str,
        timeout_s: float,
        channels: int = 1,
        close: Callable[[], None] = lambda: None,
        wait: Callable[[float], None] = time.sleep,
    ) -> None:
        self._port = port
        self._line = line
        self._device = device
        self._timeout_s = timeout_s
        self._channels = channels
        self._close = close
        self._wait = wait
        self._level = False
        self._let_light = False
        self._pulsed = False
        self._closed = False
        self._ring = False
        self._resets = 0
        self._lapses = 0

    def identify(self) -> str:
        """The identity that the box states on its data wires, or NoAnswerInTime."""
        return self._line.ask("identify", timeout_s=ASK_TIMEOUT_S).word("identity")

    def prove(self, nonce: bytes) -> bytes:
        """The answer to the challenge on the data wires; NoAnswerInTime if none."""
        answer = self._line.ask("prove", timeout_s=ASK_TIMEOUT_S, challenge=nonce)
        return answer.data("digest")

    def light_up(self) -> UnitState:
        """Half a pulse, with the light let through from now on."""
        self._let_through(True)
        return self._half_pulse()

    def keep_lit(self) -> UnitState:
        """Half a pulse; after a pause the relay wants a whole train of them."""
        return self._half_pulse()

    def ready_trial(self) -> None:
        """Closes the relay in the dark, with a train of pulses: takes 0.3 s.

        DeviceRefused when it does not close, or while light is let through.
        """
        if self._let_light:
            raise DeviceRefused(self._device, "declined", "trial: light is let through")
        for _ in range(TRAIN_HALVES):
            self._half_pulse()
            self._wait(HALF_PULSE_S)
        if not self._read_contacts().dsr:
            raise DeviceRefused(self._device, "declined", "the relay does not close")

    def try_time_out(self) -> UnitState:
        """The last pulse of a trial in the dark; the relay runs out after it."""
        self._level = False
        return self._half_pulse()

    def dark(self) -> UnitState:
        """Takes the light away at once and sends no further pulse."""
        self._pulsed = False
        self._let_through(False)
        return self._state()

    def state(self) -> UnitState:
        """The contacts, asked for anew."""
        return self._state()

    def close(self) -> None:
        """Closes the port."""
        self._close()

    def _let_through(self, light: bool) -> None:
        # Dark is repeated whenever it is asked for, light is not.
        if light and self._let_light:
            return
        self._port.set_enable(light)
        self._let_light = light

    def _half_pulse(self) -> UnitState:
        self._level = not self._level
        self._port.set_pulse(self._level)
        self._pulsed = True
        return self._state()

    def _read_contacts(self) -> Contacts:
        found = self._port.contacts(self._timeout_s)
        if self._closed and not found.dsr and self._pulsed:
            self._lapses += 1
            self._pulsed = False
        if found.ri and not self._ring:
            self._resets += 1
        self._closed, self._ring = found.dsr, found.ri
        return found

    def _state(self) -> UnitState:
        found = self._read_contacts()
        light_on = found.dsr and self._let_light
        return UnitState(
            light_on=light_on,
            door_closed=found.cts,
            shutter_open=light_on,
            reset_count=self._resets,
            lapse_count=self._lapses,
            second_closed=found.cd if self._channels > 1 else None,
        )


def open_pulse_line(
    port: str, dialect: Dialect, *, device: str, timeout_s: float, channels: int
) -> PulseLineClient:
    """The relay on ``port``, dark. Raises LineBroke where the port cannot be used."""
    opened = open_modem_port(port)
    return PulseLineClient(
        opened,
        LineClient(opened, dialect, device=device),
        device=device,
        timeout_s=timeout_s,
        channels=channels,
        close=opened.close,
    )
