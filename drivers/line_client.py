"""A question and its answer over a transport; owns every deadline (acts).

Loaded by the guard process: standard library, dialect and transport only.
"""

import time
from collections.abc import Callable

from pitchsweep.drivers.dialect import (
    LARGEST_NUMBER,
    Answer,
    Dialect,
    LineReader,
    Nonsense,
)
from pitchsweep.drivers.driver_errors import (
    AnsweredNonsense,
    DeviceRefused,
    NoAnswerInTime,
)
from pitchsweep.drivers.transport import Transport

LONGEST_SLICE_S = 0.02
"""A single wait is never longer, so that a coarse transport overshoots by no more."""

DRAIN_LIMIT_S = 5.0
"""A line that will not fall quiet within this is answering nonsense."""


class LineClient:
    """Asks one question at a time and never takes a late answer for the next one.

    ``clock`` is in seconds and never runs backwards. In a numbered dialect a late
    answer is known by its number, counted in ``late_answers`` and dropped. Without
    numbers the line is drained until quiet before the question after a timeout.
    """

    def __init__(
        self,
        transport: Transport,
        dialect: Dialect,
        *,
        device: str,
        clock: Callable[[], float] = time.monotonic,
        first_number: int | None = None,
    ) -> None:
        self.device = device
        self.dialect = dialect
        self.late_answers = 0
        self._transport = transport
        self._clock = clock
        self._reader = LineReader(dialect)
        # Starting elsewhere each time keeps what a killed predecessor left on the
        # line from bearing the number of our first questions.
        start = int(clock() * 1000.0) if first_number is None else first_number
        self._number = start % LARGEST_NUMBER
        self._given_up: set[int] = set()
        self._unsettled = False

    def ask(self, name: str, *, timeout_s: float, **fields: object) -> Answer:
        """The answer to question ``name``.

        Raises AskedIllegal before sending, NoAnswerInTime after ``timeout_s``,
        AnsweredNonsense, LineBroke, and DeviceRefused where the device declines.
        """
        if self._unsettled:
            self._drain()
        number = self._next_number() if self.dialect.numbered else None
        question = self.dialect.encode(name, fields, number)
        deadline_s = self._clock() + timeout_s
        self._transport.send(question)
        try:
            answer = self._await(name, number, timeout_s, deadline_s)
        except BaseException:  # also when interrupted: the answer may still come
            self._give_up(number)
            raise
        if answer.refuses:
            reason = str(answer.fields.get("reason", answer.name))
            raise DeviceRefused(self.device, "declined", f"{name}: {reason}")
        return answer

    def close(self) -> None:
        """Closes the transport."""
        self._transport.close()

    def _await(
        self, name: str, number: int | None, timeout_s: float, deadline_s: float
    ) -> Answer:
        while True:
            left_s = deadline_s - self._clock()
            data = self._transport.receive(min(max(left_s, 0.0), LONGEST_SLICE_S))
            found = self._pick(name, number, self._reader.feed(data))
            if found is not None:
                return found
            if left_s <= 0.0:
                raise NoAnswerInTime(self.device, name, timeout_s)

    def _pick(
        self, name: str, number: int | None, events: list[Answer | Nonsense]
    ) -> Answer | None:
        found: Answer | None = None
        for event in events:
            if isinstance(event, Nonsense):
                raise AnsweredNonsense(self.device, event.line, event.why)
            if event.number is not None and event.number in self._given_up:
                self._given_up.discard(event.number)
                self.late_answers += 1
                continue
            if found is not None or event.number != number:
                raise AnsweredNonsense(
                    self.device, repr(event).encode(), "answers no question of ours"
                )
            if event.name not in self.dialect.asks[name].answered_by:
                raise AnsweredNonsense(
                    self.device, event.name.encode(), f"is no answer to '{name}'"
                )
            found = event
        return found

    def _next_number(self) -> int:
        self._number = self._number % LARGEST_NUMBER + 1
        self._given_up.discard(self._number)
        return self._number

    def _give_up(self, number: int | None) -> None:
        if number is None:
            self._unsettled = True
        else:
            self._given_up.add(number)

    def _drain(self) -> None:
        """Reads and drops until the line has been quiet for the dialect's time."""
        limit_s = self._clock() + DRAIN_LIMIT_S
        quiet_since_s = self._clock()
        while self._clock() - quiet_since_s < self.dialect.quiet_s:
            data = self._transport.receive(LONGEST_SLICE_S)
            if data:
                self.late_answers += data.count(self.dialect.line_end)
                quiet_since_s = self._clock()
            if self._clock() > limit_s:
                raise AnsweredNonsense(self.device, data, "the line never falls quiet")
        self._reader.forget()
        self._unsettled = False
