"""Dialects: questions to bytes, bytes to events. Touches no port and no clock.

A dialect is described by a mapping (YAML read elsewhere): how lines end, whether
questions carry a block number that the answer repeats, what can be asked, and which
answers there are. Block number ``N`` and axis words such as ``B`` follow ISO 6983;
the keys of the description and the reply words are our own. Loaded by the guard
process: standard library only.
"""

import re
from collections.abc import Mapping
from dataclasses import dataclass, field

from pitchsweep.drivers.driver_errors import AskedIllegal
from pitchsweep.drivers.line_pattern import Pattern, Value, read_pattern

LINE_ENDS = {"LF": b"\n", "CR": b"\r", "CR LF": b"\r\n"}
LARGEST_NUMBER = 99999
_NUMBERED = re.compile(r"N([0-9]{1,5}) (.+)", re.DOTALL)


@dataclass(frozen=True)
class Answer:
    """A line of the device that the dialect knows; ``number`` is the question's."""

    name: str
    fields: dict[str, Value] = field(default_factory=dict)
    number: int | None = None
    refuses: bool = False

    def number_of(self, name: str) -> float:
        """The field ``name`` as a float; KeyError/TypeError if there is none such."""
        value = self.fields[name]
        if not isinstance(value, int | float):
            raise TypeError(f"field {name} of answer {self.name} is not a number")
        return float(value)

    def word(self, name: str) -> str:
        """The field ``name`` as text; KeyError/TypeError if there is none such."""
        value = self.fields[name]
        if not isinstance(value, str):
            raise TypeError(f"field {name} of answer {self.name} is not text")
        return value

    def data(self, name: str) -> bytes:
        """The field ``name`` as bytes; KeyError/TypeError if there is none such."""
        value = self.fields[name]
        if not isinstance(value, bytes):
            raise TypeError(f"field {name} of answer {self.name} is not bytes")
        return value


@dataclass(frozen=True)
class Nonsense:
    """A line that the dialect does not know, and why."""

    line: bytes
    why: str


@dataclass(frozen=True)
class Ask:
    """One question: its line and the answers that may follow it."""

    pattern: Pattern
    answered_by: frozenset[str]


@dataclass(frozen=True)
class AnswerForm:
    """One answer: its line, and whether it means that the device declined."""

    pattern: Pattern
    refuses: bool = False


@dataclass(frozen=True)
class Dialect:
    """A described dialect; make one with ``from_mapping``."""

    name: str
    line_end: bytes
    longest_bytes: int
    numbered: bool
    quiet_s: float
    asks: dict[str, Ask]
    answers: dict[str, AnswerForm]
    _by_first_word: dict[str, str]

    @classmethod
    def from_mapping(cls, described: object) -> "Dialect":
        """The dialect that ``described`` describes; AskedIllegal names a bad key."""
        top = _mapping("dialect file", described)
        _exact_keys(
            "dialect file", top, {"dialect", "line", "asks", "answers"}, {"note"}
        )
        name = top["dialect"]
        if not isinstance(name, str) or not name:
            raise AskedIllegal("dialect", name, "a name")
        line = _mapping("line", top["line"])
        _exact_keys("line", line, {"ends_with", "longest_bytes", "numbered", "quiet_s"})
        answers = _read_answers(_mapping("answers", top["answers"]))
        return cls(
            name=name,
            line_end=_read_line_end(line["ends_with"]),
            longest_bytes=_read_longest(line["longest_bytes"]),
            numbered=_read_flag("line.numbered", line["numbered"]),
            quiet_s=_read_quiet(line["quiet_s"]),
            asks=_read_asks(_mapping("asks", top["asks"]), answers),
            answers=answers,
            _by_first_word=_index_by_first_word(answers),
        )

    def encode(
        self, ask: str, fields: Mapping[str, object], number: int | None = None
    ) -> bytes:
        """The bytes of a question; AskedIllegal for an unknown one or a bad field."""
        if ask not in self.asks:
            raise AskedIllegal(
                f"question of dialect {self.name}", ask, _names(self.asks)
            )
        return self._to_bytes(self.asks[ask].pattern.write(fields), number)

    def encode_answer(
        self, name: str, fields: Mapping[str, object], number: int | None = None
    ) -> bytes:
        """The bytes of an answer, for fake devices and for tests."""
        return self._to_bytes(self.answers[name].pattern.write(fields), number)

    def read_line(self, line: bytes) -> Answer | Nonsense:
        """What ``line`` (without its end) says."""
        try:
            text = line.decode("ascii")
        except UnicodeDecodeError:
            return Nonsense(line, "bytes beyond ASCII")
        number = None
        if self.numbered:
            match = _NUMBERED.fullmatch(text)
            if match is None:
                return Nonsense(line, "no block number in front")
            number, text = int(match[1]), match[2]
        name = self._by_first_word.get(text.split(" ", 1)[0])
        if name is None:
            return Nonsense(line, f"not an answer of dialect {self.name}")
        form = self.answers[name]
        fields = form.pattern.read(text)
        if isinstance(fields, str):
            return Nonsense(line, fields)
        return Answer(name, fields, number, form.refuses)

    def _to_bytes(self, text: str, number: int | None) -> bytes:
        if self.numbered != (number is not None):
            needed = "a number" if self.numbered else "no number"
            raise AskedIllegal("block number", number, f"{needed} in {self.name}")
        if number is not None and not 0 <= number <= LARGEST_NUMBER:
            raise AskedIllegal("block number", number, f"0 to {LARGEST_NUMBER}")
        head = f"N{number} " if number is not None else ""
        line = (head + text).encode("ascii") + self.line_end
        if len(line) > self.longest_bytes:
            raise AskedIllegal("length of line", len(line), f"{self.longest_bytes}")
        return line


class LineReader:
    """Cuts a stream of bytes into lines; holds at most one unfinished line."""

    def __init__(self, dialect: Dialect) -> None:
        self._dialect = dialect
        self._held = b""
        self._skipping = False

    def feed(self, data: bytes) -> list[Answer | Nonsense]:
        """The events that ``data``, cut anywhere, completes."""
        events: list[Answer | Nonsense] = []
        *lines, self._held = (self._held + data).split(self._dialect.line_end)
        for line in lines:
            if self._skipping:
                self._skipping = False
            elif len(line) + len(self._dialect.line_end) > self._dialect.longest_bytes:
                events.append(self._too_long(line))
            else:
                events.append(self._dialect.read_line(line))
        if len(self._held) > self._dialect.longest_bytes:
            if not self._skipping:
                events.append(self._too_long(self._held))
            self._skipping = True
            end_may_have_begun = len(self._dialect.line_end) - 1
            self._held = self._held[len(self._held) - end_may_have_begun :]
        return events

    def forget(self) -> None:
        """Drops an unfinished line."""
        self._held = b""
        self._skipping = False

    @property
    def held_bytes(self) -> int:
        """How many bytes wait for the end of their line."""
        return len(self._held)

    def _too_long(self, line: bytes) -> Nonsense:
        most = self._dialect.longest_bytes
        return Nonsense(line[:most], f"a line of more than {most} bytes")


def _read_asks(
    described: Mapping[str, object], answers: Mapping[str, AnswerForm]
) -> dict[str, Ask]:
    asks: dict[str, Ask] = {}
    for name, body in described.items():
        where = f"asks.{name}"
        entry = _mapping(where, body)
        _exact_keys(where, entry, {"send", "answered_by"}, {"fields", "note"})
        pattern = read_pattern(f"{where}.send", entry["send"], entry.get("fields"))
        by = entry["answered_by"]
        if not isinstance(by, list | tuple) or not by:
            raise AskedIllegal(f"{where}.answered_by", by, "a list of answer names")
        for answer in by:
            if answer not in answers:
                raise AskedIllegal(f"{where}.answered_by", answer, _names(answers))
        asks[name] = Ask(pattern, frozenset(by))
    return asks


def _read_answers(described: Mapping[str, object]) -> dict[str, AnswerForm]:
    answers: dict[str, AnswerForm] = {}
    for name, body in described.items():
        where = f"answers.{name}"
        entry = _mapping(where, body)
        _exact_keys(where, entry, {"reads"}, {"fields", "note", "refuses"})
        pattern = read_pattern(f"{where}.reads", entry["reads"], entry.get("fields"))
        refuses = _read_flag(f"{where}.refuses", entry.get("refuses", False))
        answers[name] = AnswerForm(pattern, refuses)
    return answers


def _index_by_first_word(answers: Mapping[str, AnswerForm]) -> dict[str, str]:
    index: dict[str, str] = {}
    for name, form in answers.items():
        word = form.pattern.first_word
        if word is None:
            raise AskedIllegal(f"answers.{name}.reads", "{...", "a fixed word first")
        if word in index:
            raise AskedIllegal(
                f"answers.{name}.reads",
                word,
                f"a first word other than {index[word]}'s",
            )
        index[word] = name
    return index


def _mapping(where: str, value: object) -> dict[str, object]:
    if not isinstance(value, Mapping) or not value:
        raise AskedIllegal(where, value, "a mapping, not empty")
    for key in value:
        if not isinstance(key, str):
            raise AskedIllegal(f"{where}: key", key, "text")
    return dict(value)


def _exact_keys(
    where: str,
    given: Mapping[str, object],
    needed: set[str],
    optional: set[str] | None = None,
) -> None:
    for key in sorted(needed - set(given)):
        raise AskedIllegal(f"{where}.{key}", "missing", "the key must be there")
    for key in sorted(set(given) - needed - (optional or set())):
        raise AskedIllegal(f"{where}.{key}", given[key], _names(needed))


def _read_line_end(value: object) -> bytes:
    if not isinstance(value, str) or value not in LINE_ENDS:
        raise AskedIllegal("line.ends_with", value, _names(LINE_ENDS))
    return LINE_ENDS[value]


def _read_longest(value: object) -> int:
    if not isinstance(value, int) or isinstance(value, bool) or not 16 <= value <= 4096:
        raise AskedIllegal("line.longest_bytes", value, "whole, 16 to 4096")
    return value


def _read_quiet(value: object) -> float:
    number = isinstance(value, int | float) and not isinstance(value, bool)
    if not number or not 0.0 <= float(str(value)) <= 10.0:
        raise AskedIllegal("line.quiet_s", value, "0 to 10 s")
    return float(str(value))


def _read_flag(where: str, value: object) -> bool:
    if not isinstance(value, bool):
        raise AskedIllegal(where, value, "true or false")
    return value


def _names(items: Mapping[str, object] | set[str]) -> str:
    return ", ".join(sorted(items))
