"""Questions and answers: deadlines, late answers, nonsense. No real time passes."""

from typing import Any

import pytest
from driver_fakes import line_to

from pitchsweep.drivers.dialect import Dialect
from pitchsweep.drivers.dialect_files import shipped_dialect_mapping
from pitchsweep.drivers.driver_errors import (
    AnsweredNonsense,
    AskedIllegal,
    DeviceRefused,
    LineBroke,
    NoAnswerInTime,
)
from pitchsweep.drivers.line_client import LineClient
from pitchsweep.drivers.transport import FakeTransport

NAMED = b"NAMED stage-%d"


def _number(question: bytes) -> bytes:
    return question.split(b" ")[0]


def test_a_late_answer_is_never_taken_for_the_next_question() -> None:
    delays_s = iter([1.0, 0.1, 0.1])
    count = iter(range(9))

    def peer(question: bytes) -> list[tuple[float, bytes]]:
        line = _number(question) + b" " + NAMED % next(count) + b"\n"
        return [(next(delays_s), line)]

    line = line_to(peer)
    with pytest.raises(NoAnswerInTime) as late:
        line.ask("identify", timeout_s=0.95)
    assert (late.value.ask, late.value.timeout_s) == ("identify", 0.95)
    answer = line.ask("identify", timeout_s=0.95)
    assert answer.word("identity") == "stage-1"
    assert line.late_answers == 1
    assert line.ask("identify", timeout_s=0.95).word("identity") == "stage-2"


def test_a_late_answer_does_not_extend_the_deadline() -> None:
    replies = iter([[], [(0.15, b"N1 TAKEN\n")]])
    transport = FakeTransport(lambda q: next(replies))
    dialect = Dialect.from_mapping(shipped_dialect_mapping("rotary-line"))
    line = LineClient(
        transport, dialect, device="stage", clock=transport.now_s, first_number=0
    )
    for _ in range(2):
        with pytest.raises(NoAnswerInTime):
            line.ask("halt", timeout_s=0.2)
    assert line.late_answers == 1
    assert transport.clock_s == pytest.approx(0.4)


@pytest.mark.parametrize(
    "reply",
    [
        b"N1 HELLO\n",
        b"N2 TAKEN\n",
        b"N1 TAKEN\nN1 TAKEN\n",
        b"N1 PLACE B1.0000 RESTING ZERO-KNOWN\n",
        b"noise\nN1 TAKEN\n",
    ],
)
def test_nonsense_is_raised_not_skipped(reply: bytes) -> None:
    line = line_to(lambda question: [(0.01, reply)])
    with pytest.raises(AnsweredNonsense):
        line.ask("halt", timeout_s=1.0)


def test_a_refusal_of_the_device_names_its_reason() -> None:
    line = line_to(lambda q: [(0.0, _number(q) + b" DECLINED ZERO-LOST\n")])
    with pytest.raises(DeviceRefused, match="move: ZERO-LOST") as refusal:
        line.ask("move", timeout_s=1.0, angle_deg=1.0, feed_deg_per_min=600.0)
    assert refusal.value.reason == "declined"


def test_an_illegal_question_is_not_sent_and_a_closed_line_is_broken() -> None:
    transport = FakeTransport(lambda q: [])
    dialect = Dialect.from_mapping(shipped_dialect_mapping("rotary-line"))
    line = LineClient(transport, dialect, device="stage", clock=transport.now_s)
    with pytest.raises(AskedIllegal):
        line.ask("move", timeout_s=1.0, angle_deg=1e9, feed_deg_per_min=1.0)
    assert transport.sent == []
    line.close()
    with pytest.raises(LineBroke):
        line.ask("where", timeout_s=1.0)


def _unnumbered() -> Dialect:
    described: Any = shipped_dialect_mapping("rotary-line")
    return Dialect.from_mapping(
        {**described, "line": {**described["line"], "numbered": False}}
    )


def test_without_numbers_the_line_is_drained_until_quiet_after_a_timeout() -> None:
    replies = iter([[(0.6, b"NAMED slow"), (0.7, b"\n")], [(0.1, b"NAMED next\n")]])
    transport = FakeTransport(lambda q: next(replies))
    line = LineClient(transport, _unnumbered(), device="stage", clock=transport.now_s)
    with pytest.raises(NoAnswerInTime):
        line.ask("identify", timeout_s=0.55)
    assert line.ask("identify", timeout_s=0.5).word("identity") == "next"
    assert line.late_answers == 1


def test_without_numbers_a_line_that_never_falls_quiet_is_nonsense() -> None:
    chatter = [(0.1 * i, b"NAMED chatter\n") for i in range(10, 200)]
    replies = iter([chatter])
    transport = FakeTransport(lambda q: next(replies))
    line = LineClient(transport, _unnumbered(), device="stage", clock=transport.now_s)
    with pytest.raises(NoAnswerInTime):
        line.ask("identify", timeout_s=0.95)
    with pytest.raises(AnsweredNonsense, match="quiet"):
        line.ask("identify", timeout_s=0.5)


def test_two_clients_in_a_row_begin_with_different_numbers() -> None:
    transport = FakeTransport(lambda q: [(0.0, _number(q) + b" TAKEN\n")])
    dialect = Dialect.from_mapping(shipped_dialect_mapping("rotary-line"))
    for clock_s in (1.0, 2.0):
        transport.clock_s = clock_s
        line = LineClient(transport, dialect, device="stage", clock=transport.now_s)
        line.ask("halt", timeout_s=0.5)
    assert transport.sent == [b"N1001 HALT\n", b"N2001 HALT\n"]
