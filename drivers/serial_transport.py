"""A serial port as a transport: the only file that uses pyserial (acts).

Every exception of the library leaves this file as LineBroke or AskedIllegal. Loaded
by the guard process. Nothing POSIX-only is imported at module level.
"""

from collections.abc import Callable
from types import TracebackType
from typing import Self, TypeVar

import serial

from pitchsweep.drivers.driver_errors import AskedIllegal, LineBroke

WRITE_TIMEOUT_S = 0.5
_T = TypeVar("_T")


def library_errors() -> tuple[type[Exception], ...]:
    """What pyserial lets out of an open port: its own, the system's, the terminal's.

    TypeError and AttributeError come from a port closed while it is being read.
    """
    found: list[type[Exception]] = [
        serial.SerialException,
        OSError,
        TypeError,
        AttributeError,
    ]
    try:
        import termios
    except ImportError:
        return tuple(found)
    return (*found, termios.error)


class SerialTransport:
    """A port held exclusively. Make one with ``open_serial``."""

    def __init__(self, port: serial.Serial, name: str) -> None:
        self._port = port
        self._errors = library_errors()
        self.name = name

    def send(self, data: bytes) -> None:
        """Writes all of ``data`` or raises LineBroke (also when the write hangs)."""
        self._translated("writing", lambda: self._port.write(data))

    def receive(self, wait_s: float) -> bytes:
        """What has arrived, after waiting at most ``wait_s`` for the first byte."""
        return self._translated("reading", lambda: self._read(wait_s))

    def close(self) -> None:
        """Gives the port back; closing twice does no harm."""
        self._translated("closing", self._port.close)

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.close()

    def _read(self, wait_s: float) -> bytes:
        wait_s = max(wait_s, 0.0)
        if self._port.timeout != wait_s:
            self._port.timeout = wait_s
        first = bytes(self._port.read(1))
        waiting = self._port.in_waiting if first else 0
        return first + bytes(self._port.read(waiting)) if waiting else first

    def _translated(self, doing: str, act: Callable[[], _T]) -> _T:
        try:
            return act()
        except self._errors as error:
            raise LineBroke(self.name, doing, error) from error


def open_serial(port: str, *, baud: int = 115200) -> SerialTransport:
    """The opened port (a device path or a pyserial URL), locked for this process.

    Raises LineBroke when it is missing, not allowed, not a terminal or locked by
    another process, AskedIllegal for a malformed URL or an impossible baud.
    """
    try:
        opened = serial.serial_for_url(
            port,
            baudrate=baud,
            timeout=0.02,
            write_timeout=WRITE_TIMEOUT_S,
            exclusive=True,
        )
    except ValueError as error:
        raise AskedIllegal("port", port, f"a device path or URL ({error})") from error
    except library_errors() as error:
        raise LineBroke(port, "opening", error) from error
    return SerialTransport(opened, port)
