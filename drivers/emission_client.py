"""The unit that switches light, as the guard sees it (acts).

Loaded by the guard process: standard library, dialect, transport and line client only.
"""

from dataclasses import dataclass

from pitchsweep.drivers.dialect import Answer
from pitchsweep.drivers.line_client import LineClient

DEFAULT_TIMEOUT_S = 0.1
_SECOND: dict[str, bool | None] = {"SHUT": True, "AJAR": False, "ABSENT": None}


@dataclass(frozen=True)
class UnitState:
    """What the unit says of itself in one answer.

    ``reset_count`` counts presses of its reset button, ``lapse_count`` how often the
    keep-alive time ran out (also in a trial in the dark), both since the unit started.
    ``second_closed`` is None where the unit has one interlock channel only.
    """

    light_on: bool
    door_closed: bool
    shutter_open: bool
    reset_count: int
    lapse_count: int
    second_closed: bool | None = None

    @property
    def interlock_closed(self) -> bool:
        """True when every channel that the unit reports is closed."""
        return self.door_closed and self.second_closed is not False

    @property
    def interlock_open(self) -> bool:
        """True when every channel that the unit reports is open."""
        return not self.door_closed and self.second_closed is not True

    @property
    def channels_agree(self) -> bool:
        """False when two channels contradict each other."""
        return self.interlock_closed or self.interlock_open


class EmissionClient:
    """Questions to the unit, each with a deadline of ``timeout_s``.

    Every method raises NoAnswerInTime, AnsweredNonsense, LineBroke or DeviceRefused.
    Nothing is ever repeated by itself: light comes only by calling ``light_up`` and is
    held only by calling ``keep_lit``.
    """

    def __init__(
        self, line: LineClient, *, timeout_s: float = DEFAULT_TIMEOUT_S
    ) -> None:
        self._line = line
        self._timeout_s = timeout_s
        self._ticket = 0

    def identify(self) -> str:
        """The identity that the unit states."""
        return self._ask("identify").word("identity")

    def prove(self, nonce: bytes) -> bytes:
        """The unit's answer to the challenge ``nonce`` (1 to 32 bytes).

        A simulated unit answers HMAC-SHA256(key, nonce), 32 bytes, with the key made
        when it was started; a real one declines: DeviceRefused.
        """
        return self._ask("prove", challenge=nonce).data("digest")

    def light_up(self) -> UnitState:
        """Asks for light, for one keep-alive time.

        DeviceRefused unless the unit's latest answer is younger than that.
        """
        return self._standing("light", ticket=self._ticket)

    def keep_lit(self) -> UnitState:
        """Holds the light for one more keep-alive time; DeviceRefused in the dark."""
        return self._standing("keep")

    def ready_trial(self) -> None:
        """Nothing is needed before the time-out is tried."""

    def try_time_out(self) -> UnitState:
        """Starts the keep-alive time once with the shutter held shut: stays dark.

        ``lapse_count`` rises by one when it has run out. DeviceRefused while lit.
        """
        return self._standing("try")

    def dark(self) -> UnitState:
        """Takes the light away at once."""
        return self._standing("dark")

    def state(self) -> UnitState:
        """Asks without changing anything; does not hold the light."""
        return self._standing("state")

    def close(self) -> None:
        """Closes the line. Closing does not ask for dark; the unit lapses by itself."""
        self._line.close()

    def _standing(self, name: str, **fields: object) -> UnitState:
        answer = self._ask(name, **fields)
        self._ticket = int(answer.number_of("ticket"))
        return _read_state(answer)

    def _ask(self, name: str, **fields: object) -> Answer:
        return self._line.ask(name, timeout_s=self._timeout_s, **fields)


def _read_state(answer: Answer) -> UnitState:
    return UnitState(
        light_on=answer.word("light") == "LIT",
        door_closed=answer.word("door") == "SHUT",
        shutter_open=answer.word("shutter") == "CLEAR",
        reset_count=int(answer.number_of("resets")),
        lapse_count=int(answer.number_of("lapses")),
        second_closed=_SECOND[answer.word("second")],
    )
