"""Sensors beside the part: air and part temperature, power at the part (acts)."""

import threading
from typing import Protocol

from pitchsweep.drivers.devices import AirReading
from pitchsweep.drivers.dialect import Answer
from pitchsweep.drivers.driver_errors import AnsweredNonsense
from pitchsweep.drivers.line_client import LineClient

ANSWER_TIMEOUT_S = 2.0


class AirSensorClient:
    """Reads the air. Raises DriverError when the sensor does not answer properly."""

    def __init__(self, line: LineClient) -> None:
        self._line = line

    def read(self) -> AirReading:
        """Air and part temperature now."""
        answer = _ask(self._line, "air")
        return AirReading(
            temperature_C=_number(self._line, answer, "temperature_c"),
            pressure_hPa=_number(self._line, answer, "pressure_hpa"),
            humidity_percent=_number(self._line, answer, "humidity_percent"),
            part_temperature_C=_number(self._line, answer, "part_temperature_c"),
        )

    def close(self) -> None:
        """Closes the line."""
        self._line.close()


class PowerSensorClient:
    """Reads the power at the part, from any thread. Raises DriverError as above."""

    def __init__(self, line: LineClient) -> None:
        self._line = line
        self._lock = threading.Lock()

    def read_mw(self) -> float:
        """The power now, in milliwatts."""
        with self._lock:
            return _number(self._line, _ask(self._line, "power"), "power_mw")

    def close(self) -> None:
        """Closes the line."""
        self._line.close()


class ReadsAir(Protocol):
    """What reads the air."""

    def read(self) -> AirReading: ...


class ReadsPower(Protocol):
    """What reads the power."""

    def read_mw(self) -> float: ...


def _ask(line: LineClient, name: str) -> Answer:
    return line.ask(name, timeout_s=ANSWER_TIMEOUT_S)


def _number(line: LineClient, answer: Answer, name: str) -> float:
    try:
        return answer.number_of(name)
    except (KeyError, TypeError) as error:
        raise AnsweredNonsense(line.device, answer.name.encode(), str(error)) from None
