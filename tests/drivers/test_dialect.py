"""Dialects: descriptions refused by key, lines read however they are cut."""

import copy
from typing import Any

import pytest

from pitchsweep.drivers.dialect import Answer, Dialect, LineReader, Nonsense
from pitchsweep.drivers.dialect_files import (
    shipped_dialect,
    shipped_dialect_mapping,
    shipped_dialect_names,
)
from pitchsweep.drivers.driver_errors import AskedIllegal

STAGE = shipped_dialect("rotary-line")
UNIT = shipped_dialect("emission-line")

# One list through writer and reader: answer, fields, the line on the wire.
ANSWERS: list[tuple[Dialect, str, dict[str, Any], bytes]] = [
    (STAGE, "named", {"identity": "stage no 4"}, b"N7 NAMED stage no 4\n"),
    (STAGE, "taken", {}, b"N7 TAKEN\n"),
    (
        STAGE,
        "place",
        {"angle_deg": -12.5, "motion": "TURNING", "zero": "ZERO-KNOWN"},
        b"N7 PLACE B-12.5000 TURNING ZERO-KNOWN\n",
    ),
    (
        STAGE,
        "declined",
        {"reason": "OUTSIDE-TRAVEL"},
        b"N7 DECLINED OUTSIDE-TRAVEL\n",
    ),
    (UNIT, "proof", {"digest": b"\x00\xff"}, b"N7 PROOF 00ff\n"),
    (
        UNIT,
        "standing",
        {
            "light": "LIT",
            "door": "AJAR",
            "second": "ABSENT",
            "shutter": "CLEAR",
            "resets": 2,
            "lapses": 0,
            "ticket": 12,
        },
        b"N7 LIGHT LIT DOOR AJAR SECOND ABSENT SHUTTER CLEAR RESETS 2 LAPSES 0"
        b" TICKET 12\n",
    ),
]


@pytest.mark.parametrize(("dialect", "name", "fields", "line"), ANSWERS)
def test_writer_and_reader_agree_on_every_answer(
    dialect: Dialect, name: str, fields: dict[str, Any], line: bytes
) -> None:
    expected = Answer(name, fields, 7, dialect.answers[name].refuses)
    assert dialect.encode_answer(name, fields, 7) == line
    assert LineReader(dialect).feed(line) == [expected]


@pytest.mark.parametrize(("dialect", "name", "fields", "line"), ANSWERS)
def test_a_line_may_be_cut_anywhere(
    dialect: Dialect, name: str, fields: dict[str, Any], line: bytes
) -> None:
    whole = LineReader(dialect).feed(line)
    by_byte = LineReader(dialect)
    assert [e for i in range(len(line)) for e in by_byte.feed(line[i : i + 1])] == whole
    with_tail = LineReader(dialect)
    assert with_tail.feed(line + line[:5]) == whole
    assert with_tail.feed(line[5:]) == whole


def test_questions_carry_iso_6983_words() -> None:
    # ISO 6983-1: N block number, G90 absolute, G1 at feed, B about the Y axis, F feed.
    fields = {"angle_deg": 12.34567, "feed_deg_per_min": 600}
    assert STAGE.encode("move", fields, 12) == b"N12 G90 G1 B12.3457 F600.00\n"
    minus_zero = {"angle_deg": -0.00001, "feed_deg_per_min": 600}
    assert STAGE.encode("move", minus_zero, 1) == b"N1 G90 G1 B0.0000 F600.00\n"


@pytest.mark.parametrize(
    "fields",
    [
        {"angle_deg": 400.1, "feed_deg_per_min": 600},
        {"angle_deg": float("nan"), "feed_deg_per_min": 600},
        {"angle_deg": True, "feed_deg_per_min": 600},
        {"angle_deg": "1", "feed_deg_per_min": 600},
        {"angle_deg": 1.0},
        {"angle_deg": 1.0, "feed_deg_per_min": 600, "speed": 1},
    ],
)
def test_illegal_values_are_never_sent(fields: dict[str, object]) -> None:
    with pytest.raises(AskedIllegal):
        STAGE.encode("move", fields, 1)


def test_unknown_question_and_missing_number_are_illegal() -> None:
    with pytest.raises(AskedIllegal, match="identify, move, where"):
        STAGE.encode("dance", {}, 1)
    with pytest.raises(AskedIllegal, match="block number"):
        STAGE.encode("where", {}, None)


@pytest.mark.parametrize(
    "line",
    [
        b"N1 WHATEVER\n",
        b"TAKEN\n",
        b"\n",
        b"N1 \n",
        b"N1  TAKEN\n",
        b"N1 TAKEN \n",
        b"N1 TAKEN\r\n",
        b"N1 TAKEN again\n",
        b"N999999 TAKEN\n",
        b"N1 PLACE B1e3 RESTING ZERO-KNOWN\n",
        b"N1 PLACE B999.0 RESTING ZERO-KNOWN\n",
        b"N1 PLACE Bnan RESTING ZERO-KNOWN\n",
        b"N1 PLACE C1.0 RESTING ZERO-KNOWN\n",
        b"N1 PLACE B1.0 SLEEPING ZERO-KNOWN\n",
        b"N1 NAMED \xb5\n",
        b"\xff\x00\xfe\n",
    ],
)
def test_unknown_reply_is_refused(line: bytes) -> None:
    events = LineReader(STAGE).feed(line)
    assert len(events) == 1 and isinstance(events[0], Nonsense)
    assert events[0].line == line[:-1] and events[0].why


def test_reader_does_not_grow_without_limit() -> None:
    reader = LineReader(STAGE)
    events = [e for _ in range(1000) for e in reader.feed(b"x" * 100)]
    assert len(events) == 1 and reader.held_bytes <= STAGE.longest_bytes
    assert reader.feed(b"still the same line\nN3 TAKEN\n") == [Answer("taken", {}, 3)]


def test_an_overlong_line_in_one_piece_is_nonsense() -> None:
    events = LineReader(STAGE).feed(b"N1 NAMED " + b"x" * 500 + b"\nN2 TAKEN\n")
    assert [type(e) for e in events] == [Nonsense, Answer]


def test_shipped_dialects_are_these_four() -> None:
    assert shipped_dialect_names() == (
        "air-line",
        "emission-line",
        "power-line",
        "rotary-line",
    )
    with pytest.raises(
        AskedIllegal, match="air-line, emission-line, power-line, rotary-line"
    ):
        shipped_dialect("klingon")


def _damaged(path: str, value: object) -> Any:
    """The stage's description with one key set, or removed where value is None."""
    described: Any = copy.deepcopy(shipped_dialect_mapping("rotary-line"))
    *above, last = path.split("/")
    place = described
    for key in above:
        place = place[key]
    if value is None:
        del place[last]
    else:
        place[last] = value
    return described


@pytest.mark.parametrize(
    ("path", "value", "named"),
    [
        ("dialect", 7, "dialect"),
        ("line", None, "dialect file.line"),
        ("speed", 7, "dialect file.speed"),
        ("line/ends_with", "NUL", "line.ends_with"),
        ("line/longest_bytes", 5, "line.longest_bytes"),
        ("line/longest_bytes", True, "line.longest_bytes"),
        ("line/numbered", "yes", "line.numbered"),
        ("line/quiet_s", -1, "line.quiet_s"),
        ("asks/where/answered_by", ["nobody"], "asks.where.answered_by"),
        ("asks/where/answered_by", [], "asks.where.answered_by"),
        ("asks/where/send", "WHERE  NOW", "asks.where.send"),
        ("asks/where/send", "WHERE {x}", "asks.where.send.fields"),
        ("asks/move/fields/angle_deg/kind", "angle", "fields.angle_deg.kind"),
        ("asks/move/fields/angle_deg/least", None, "fields.angle_deg.least"),
        ("asks/move/fields/angle_deg/least", 500, "fields.angle_deg.least"),
        ("asks/move/fields/angle_deg/least", ".nan", "fields.angle_deg.least"),
        ("asks/move/fields/angle_deg/decimals", 99, "fields.angle_deg.decimals"),
        ("asks/move/fields/angle_deg/colour", 1, "fields.angle_deg.colour"),
        ("answers/taken/reads", "PLACE", "answers.taken.reads"),
        ("answers/taken/reads", "", "answers.taken.reads"),
        ("answers/named/reads", "{identity} NAMED", "answers.named.reads"),
        ("answers/place/fields/zero/choices", ["a b"], "fields.zero.choices"),
        ("answers/declined/refuses", "often", "answers.declined.refuses"),
    ],
)
def test_a_damaged_description_is_refused_by_key(
    path: str, value: object, named: str
) -> None:
    with pytest.raises(AskedIllegal) as refusal:
        Dialect.from_mapping(_damaged(path, value))
    assert named in refusal.value.what and refusal.value.allowed


@pytest.mark.parametrize("described", [None, [], "text", {}, {1: 2}])
def test_a_description_that_is_no_mapping_is_refused(described: object) -> None:
    with pytest.raises(AskedIllegal):
        Dialect.from_mapping(described)
