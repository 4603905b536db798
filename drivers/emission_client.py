"""The unit that switches light, as the guard sees it (acts).

Loaded by the guard process: standard library, dialect, transport and line client only.
"""

from dataclasses import dataclass

from pitchsweep.drivers.dialect import Answer
from pitchsweep.drivers.line_client import LineClient

DEFAULT_TIMEOUT_S = 0.1


@dataclass(frozen=True)
class UnitState:
    """What the unit says of itself in one answer.

    ``reset_count`` counts presses of its reset button, ``lapse_count`` how often the
    light went out because no keep-alive came in time, both since the unit started.
    """

    light_on: bool
    door_closed: bool
    shutter_open: bool
    reset_count: int
    lapse_count: int


class EmissionClient:
    """Questions to the unit, each with a deadline of ``timeout_s``.

    Every method raises NoAnswerInTime, AnsweredNonsense, LineBroke or DeviceRefused.
    Nothing is ever repeated by itself: light is held only by calling ``keep_lit``.
    """

    def __init__(
        self, line: LineClient, *, timeout_s: float = DEFAULT_TIMEOUT_S
    ) -> None:
        self._line = line
        self._timeout_s = timeout_s

    def identify(self) -> str:
        """The identity that the unit states."""
        return self._ask("identify").word("identity")

    def prove(self, nonce: bytes) -> bytes:
        """The unit's answer to the challenge ``nonce`` (1 to 32 bytes).

        A simulated unit answers HMAC-SHA256(key, nonce), 32 bytes, with the key made
        when it was started; a real one declines: DeviceRefused.
        """
        return self._ask("prove", challenge=nonce).data("digest")

    def keep_lit(self) -> UnitState:
        """Asks for light, or holds it for one more keep-alive time."""
        return _read_state(self._ask("keep"))

    def dark(self) -> UnitState:
        """Takes the light away at once."""
        return _read_state(self._ask("dark"))

    def state(self) -> UnitState:
        """Asks without changing anything; does not hold the light."""
        return _read_state(self._ask("state"))

    def close(self) -> None:
        """Closes the line. Closing does not ask for dark; the unit lapses by itself."""
        self._line.close()

    def _ask(self, name: str, **fields: object) -> Answer:
        return self._line.ask(name, timeout_s=self._timeout_s, **fields)


def _read_state(answer: Answer) -> UnitState:
    return UnitState(
        light_on=answer.word("light") == "LIT",
        door_closed=answer.word("door") == "SHUT",
        shutter_open=answer.word("shutter") == "CLEAR",
        reset_count=int(answer.number_of("resets")),
        lapse_count=int(answer.number_of("lapses")),
    )
