"""A serial port whose control lines are used: pulses out, contacts in (acts).

Local ports and RFC 2217 alike. pyserial's network client waits 50 ms and more for
every change of a line and gives contacts from a cache; here changes are sent without
waiting, and contacts are asked for anew each time and counted only from the answer.
Even so a port server adds its own delay, so that nothing is promised here within 50 ms.
Loaded by the guard process.
"""

import threading
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Protocol

import serial
import serial.rfc2217 as rfc2217

from pitchsweep.drivers.driver_errors import AskedIllegal, LineBroke, NoAnswerInTime
from pitchsweep.drivers.serial_transport import SerialTransport, library_errors

NETWORK = "rfc2217://"


@dataclass(frozen=True)
class Contacts:
    """The four inputs of a port: clear to send, data set ready, carrier, ring."""

    cts: bool
    dsr: bool
    cd: bool
    ri: bool


class ModemPort(Protocol):
    """Control lines of a port; failures raise LineBroke or NoAnswerInTime."""

    def set_pulse(self, level: bool) -> None: ...

    def set_enable(self, level: bool) -> None: ...

    def contacts(self, wait_s: float) -> Contacts: ...


# The published types of this class know neither its cache nor its telnet methods.
_NetworkClient: Any = rfc2217.Serial


class _NetworkPort(_NetworkClient):  # type: ignore[misc]
    """pyserial's client, which also tells when contacts were last reported."""

    def __init__(self) -> None:
        self.reported = threading.Condition()
        self.reports = 0
        super().__init__()

    def _telnet_process_subnegotiation(self, suboption: bytes) -> None:
        super()._telnet_process_subnegotiation(suboption)
        if suboption[1:2] == rfc2217.SERVER_NOTIFY_MODEMSTATE:
            with self.reported:
                self.reports += 1
                self.reported.notify_all()

    def control(self, value: bytes) -> None:
        """Sends a change of a line without waiting for its answer."""
        self.rfc2217_send_subnegotiation(rfc2217.SET_CONTROL, value)

    def fresh_state(self, wait_s: float) -> int | None:
        """The contacts as reported after this call, None when nothing came."""
        with self.reported:
            before = self.reports
        self.rfc2217_send_subnegotiation(rfc2217.NOTIFY_MODEMSTATE)
        with self.reported:
            if not self.reported.wait_for(lambda: self.reports > before, wait_s):
                return None
            return int(self._modemstate)


class NetworkModemPort(SerialTransport):
    """Control lines over RFC 2217."""

    def __init__(self, port: Any, name: str) -> None:
        super().__init__(port, name)
        self._network = port

    def set_pulse(self, level: bool) -> None:
        """Sets the line that carries the pulses."""
        value = rfc2217.SET_CONTROL_RTS_ON if level else rfc2217.SET_CONTROL_RTS_OFF
        self._translated("setting RTS", lambda: self._network.control(value))

    def set_enable(self, level: bool) -> None:
        """Sets the line without which the relay lets no light through."""
        value = rfc2217.SET_CONTROL_DTR_ON if level else rfc2217.SET_CONTROL_DTR_OFF
        self._translated("setting DTR", lambda: self._network.control(value))

    def contacts(self, wait_s: float) -> Contacts:
        """The contacts as the far end reports them now, never from the cache."""
        found: int | None = self._translated(
            "reading contacts", lambda: self._network.fresh_state(wait_s)
        )
        if found is None:
            raise NoAnswerInTime(self.name, "contacts", wait_s)
        return Contacts(
            cts=bool(found & rfc2217.MODEMSTATE_MASK_CTS),
            dsr=bool(found & rfc2217.MODEMSTATE_MASK_DSR),
            cd=bool(found & rfc2217.MODEMSTATE_MASK_CD),
            ri=bool(found & rfc2217.MODEMSTATE_MASK_RI),
        )


class LocalModemPort(SerialTransport):
    """Control lines of a port of this computer."""

    def set_pulse(self, level: bool) -> None:
        """Sets the line that carries the pulses."""
        self._translated("setting RTS", lambda: setattr(self._port, "rts", level))

    def set_enable(self, level: bool) -> None:
        """Sets the line without which the relay lets no light through."""
        self._translated("setting DTR", lambda: setattr(self._port, "dtr", level))

    def contacts(self, wait_s: float) -> Contacts:
        """The contacts now."""
        port = self._port
        return self._translated(
            "reading contacts",
            lambda: Contacts(cts=port.cts, dsr=port.dsr, cd=port.cd, ri=port.ri),
        )


def open_modem_port(
    port: str, *, baud: int = 115200
) -> LocalModemPort | NetworkModemPort:
    """The opened port with both outputs low, which they are kept until told otherwise.

    Raises LineBroke when it cannot be opened or used, AskedIllegal for a bad URL.
    """
    network = port.startswith(NETWORK)
    opened: Any = _NetworkPort() if network else serial.Serial(exclusive=True)
    _translated_opening(port, lambda: _open(opened, port, baud))
    if network:
        return NetworkModemPort(opened, port)
    return LocalModemPort(opened, port)


def _open(opened: Any, port: str, baud: int) -> None:
    opened.port = port
    opened.baudrate = baud
    opened.timeout = 0.02
    opened.rts = False
    opened.dtr = False
    opened.open()


def _translated_opening(port: str, act: Callable[[], None]) -> None:
    try:
        act()
    except ValueError as error:
        raise AskedIllegal("port", port, f"a device path or URL ({error})") from error
    except library_errors() as error:
        raise LineBroke(port, "opening", error) from error
