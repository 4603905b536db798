"""The serial port: everything that pyserial lets out becomes one of our errors."""

import inspect
import termios

import pytest
import serial
from serial import serialutil

from pitchsweep.drivers.driver_errors import AskedIllegal, LineBroke
from pitchsweep.drivers.serial_transport import SerialTransport, open_serial

LIBRARY_ERRORS = sorted(
    {
        error
        for module in (serial, serialutil)
        for _, error in inspect.getmembers(module, inspect.isclass)
        if issubclass(error, Exception)
    }
    | {OSError, PermissionError, TimeoutError, TypeError, termios.error},
    key=lambda error: error.__name__,
)


class _FailingPort:
    """A port of which everything fails with one error."""

    timeout = 0.0
    in_waiting = 1

    def __init__(self, error: type[Exception]) -> None:
        self._error = error

    def read(self, size: int) -> bytes:
        raise self._error("failed")

    def write(self, data: bytes) -> int:
        raise self._error("failed")

    def close(self) -> None:
        raise self._error("failed")


@pytest.mark.parametrize("error", LIBRARY_ERRORS)
def test_no_library_error_is_left_unmapped(error: type[Exception]) -> None:
    if error is serialutil.PortNotOpenError:  # takes no message
        error = type("Closed", (serialutil.SerialException,), {})
    transport = SerialTransport(_FailingPort(error), "port x")  # type: ignore[arg-type]
    for act in (
        lambda: transport.send(b"x"),
        lambda: transport.receive(0.01),
        transport.close,
    ):
        with pytest.raises(LineBroke, match="port x") as broke:
            act()
        assert isinstance(broke.value.cause, error)


def test_serial_errors_are_known() -> None:
    names = {error.__name__ for error in LIBRARY_ERRORS}
    assert {"SerialException", "SerialTimeoutException", "PortNotOpenError"} <= names


def test_a_missing_port_is_a_broken_line() -> None:
    with pytest.raises(LineBroke, match="/dev/no-such-port"):
        open_serial("/dev/no-such-port")


def test_a_malformed_url_is_illegal() -> None:
    with pytest.raises(AskedIllegal, match="nonsense://"):
        open_serial("nonsense://port")


def test_bytes_pass_through_a_looped_port_and_a_closed_one_is_broken() -> None:
    with open_serial("loop://") as transport:
        transport.send(b"N1 WHO\n")
        assert transport.receive(1.0) == b"N1 WHO\n"
        assert transport.receive(0.0) == b""
    with pytest.raises(LineBroke):
        transport.receive(0.0)
    with pytest.raises(LineBroke):
        transport.send(b"x")
