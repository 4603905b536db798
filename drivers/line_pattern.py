"""Patterns: one line of a dialect, written from fields and read back (pure).

A pattern is a row of tokens with one space between them. A token is a fixed word
(``PLACE``) or a field, with or without an address in front (``B{angle_deg}``,
``{motion}``). Loaded by the guard process: standard library only.
"""

import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Literal

from pitchsweep.drivers.driver_errors import AskedIllegal

Value = float | int | str | bytes
Kind = Literal["number", "whole", "choice", "hex", "text"]

KINDS: tuple[Kind, ...] = ("number", "whole", "choice", "hex", "text")
_KEYS_OF_KIND: dict[str, frozenset[str]] = {
    "number": frozenset({"decimals", "least", "most"}),
    "whole": frozenset({"least", "most"}),
    "choice": frozenset({"choices"}),
    "hex": frozenset({"longest_bytes"}),
    "text": frozenset(),
}
_TOKEN = re.compile(r"([^{} ]*)\{([a-z][a-z0-9_]*)\}")
_WORD = re.compile(r"[!-z|~]+")
_NUMBER = re.compile(r"-?[0-9]{1,12}(\.[0-9]{1,12})?")
_WHOLE = re.compile(r"-?[0-9]{1,15}")
_HEX = re.compile(r"([0-9a-f]{2})+")
_TEXT = re.compile(r"[!-~]([ -~]*[!-~])?")


@dataclass(frozen=True)
class Field:
    """One value inside a line: its kind and what it may be."""

    kind: Kind
    decimals: int = 0
    least: float = 0.0
    most: float = 0.0
    choices: tuple[str, ...] = ()
    longest_bytes: int = 0

    def write(self, name: str, value: object) -> str:
        """The text of ``value``; AskedIllegal when it is of another kind or range."""
        if self.kind == "choice":
            if value in self.choices and isinstance(value, str):
                return value
            raise AskedIllegal(name, value, self._allowed())
        if self.kind == "hex":
            if isinstance(value, bytes) and 0 < len(value) <= self.longest_bytes:
                return value.hex()
            raise AskedIllegal(name, value, self._allowed())
        if self.kind == "text":
            if isinstance(value, str) and _TEXT.fullmatch(value):
                return value
            raise AskedIllegal(name, value, self._allowed())
        return self._write_number(name, value)

    def _write_number(self, name: str, value: object) -> str:
        whole = self.kind == "whole"
        fits = isinstance(value, int) if whole else isinstance(value, int | float)
        if isinstance(value, bool) or not fits:
            raise AskedIllegal(name, value, self._allowed())
        assert isinstance(value, int | float)
        if not self.least <= value <= self.most:  # also refuses NaN
            raise AskedIllegal(name, value, self._allowed())
        text = str(value) if whole else f"{value:.{self.decimals}f}"
        return text if float(text) != 0.0 else text.lstrip("-")

    def read(self, text: str) -> Value | None:
        """The value that ``text`` stands for, or None where it stands for none."""
        if self.kind == "choice":
            return text if text in self.choices else None
        if self.kind == "text":
            return text if _TEXT.fullmatch(text) else None
        if self.kind == "hex":
            fits = _HEX.fullmatch(text) and len(text) <= 2 * self.longest_bytes
            return bytes.fromhex(text) if fits else None
        value: float | int
        if self.kind == "whole":
            if not _WHOLE.fullmatch(text):
                return None
            value = int(text)
        else:
            if not _NUMBER.fullmatch(text):
                return None
            value = float(text)
        return value if self.least <= value <= self.most else None

    def _allowed(self) -> str:
        if self.kind == "choice":
            return "one of " + ", ".join(self.choices)
        if self.kind == "hex":
            return f"1 to {self.longest_bytes} bytes"
        if self.kind == "text":
            return "printable ASCII, not empty, no space at either end"
        noun = "a whole number" if self.kind == "whole" else "a number"
        return f"{noun} from {self.least:g} to {self.most:g}"


@dataclass(frozen=True)
class Token:
    """A fixed word (``field`` is None, ``text`` the word) or a field after ``text``."""

    text: str
    field: str | None = None


@dataclass(frozen=True)
class Pattern:
    """A row of tokens and the fields they name."""

    tokens: tuple[Token, ...]
    fields: dict[str, Field]

    @property
    def first_word(self) -> str | None:
        """The fixed word the line begins with; None when it begins with a field."""
        return None if self.tokens[0].field is not None else self.tokens[0].text

    def write(self, values: Mapping[str, object]) -> str:
        """The line of ``values``; AskedIllegal on a missing, unknown or bad field."""
        for name in sorted(set(values) ^ set(self.fields)):
            allowed = ", ".join(sorted(self.fields)) or "no field"
            raise AskedIllegal("field", name, f"exactly {allowed}")
        return " ".join(
            token.text
            if token.field is None
            else token.text
            + self.fields[token.field].write(token.field, values[token.field])
            for token in self.tokens
        )

    def read(self, line: str) -> dict[str, Value] | str:
        """The fields of ``line``, or in words why it is not of this pattern."""
        parts = line.split(" ", len(self.tokens) - 1)
        if len(parts) != len(self.tokens):
            return f"{len(parts)} words where {len(self.tokens)} belong"
        found: dict[str, Value] = {}
        for token, part in zip(self.tokens, parts, strict=True):
            if token.field is None:
                if part != token.text:
                    return f"{part!r} where {token.text!r} belongs"
                continue
            text = part.removeprefix(token.text)
            value = self.fields[token.field].read(text)
            if value is None or not part.startswith(token.text):
                return f"{part!r} is no {token.text}{{{token.field}}}"
            found[token.field] = value
        return found


def read_pattern(where: str, text: object, fields: object) -> Pattern:
    """The pattern that a dialect's ``text`` and ``fields`` mapping describe.

    ``where`` names the place in the dialect for AskedIllegal, which is raised for
    anything malformed: double spaces, unknown or unused fields, wrong bounds.
    """
    if not isinstance(text, str) or not text:
        raise AskedIllegal(where, text, "words and {fields}, one space between them")
    described = _read_fields(f"{where}.fields", fields)
    tokens = tuple(_read_token(where, part) for part in text.split(" "))
    named = [token.field for token in tokens if token.field is not None]
    if sorted(named) != sorted(described):
        raise AskedIllegal(
            f"{where}.fields",
            sorted(described),
            f"each of {sorted(named)} exactly once",
        )
    for name in named[:-1] if tokens[-1].field else named:
        if described[name].kind == "text":
            raise AskedIllegal(f"{where}: field {name}", "text", "only as last word")
    return Pattern(tokens, described)


def _read_token(where: str, part: str) -> Token:
    match = _TOKEN.fullmatch(part)
    if match:
        return Token(match[1], match[2])
    if not _WORD.fullmatch(part):
        raise AskedIllegal(where, part, "a word, {field} or a word before a {field}")
    return Token(part)


def _read_fields(where: str, fields: object) -> dict[str, Field]:
    if fields is None:
        return {}
    if not isinstance(fields, Mapping):
        raise AskedIllegal(where, fields, "a mapping of field names")
    return {str(k): _read_field(f"{where}.{k}", v) for k, v in fields.items()}


def _read_field(where: str, described: object) -> Field:
    if not isinstance(described, Mapping):
        raise AskedIllegal(where, described, "a mapping with 'kind'")
    given: dict[str, Any] = {str(k): v for k, v in described.items()}
    kind = given.pop("kind", None)
    if kind not in KINDS:
        raise AskedIllegal(f"{where}.kind", kind, ", ".join(KINDS))
    for key in sorted(set(given) ^ _KEYS_OF_KIND[kind]):
        keys = ", ".join(sorted(_KEYS_OF_KIND[kind])) or "no further key"
        raise AskedIllegal(f"{where}.{key}", given.get(key, "missing"), keys)
    _check_bounds(where, given)
    if "choices" in given:
        given["choices"] = tuple(given["choices"])
    return Field(kind=kind, **given)


def _check_bounds(where: str, given: Mapping[str, Any]) -> None:
    for key in ("least", "most"):
        if key in given and not _is_number(given[key]):
            raise AskedIllegal(f"{where}.{key}", given[key], "a number within 1e12")
    if "least" in given and given["least"] > given["most"]:
        raise AskedIllegal(f"{where}.least", given["least"], "not above 'most'")
    for key, most in (("decimals", 9), ("longest_bytes", 256)):
        value = given.get(key, 0)
        if type(value) is not int or not 0 <= value <= most:
            raise AskedIllegal(f"{where}.{key}", value, f"whole, 0 to {most}")
    choices = given.get("choices", ["a"])
    if not isinstance(choices, list | tuple) or not choices:
        raise AskedIllegal(f"{where}.choices", choices, "a list of words")
    for choice in choices:
        if not isinstance(choice, str) or not _WORD.fullmatch(choice):
            raise AskedIllegal(f"{where}.choices", choice, "words without spaces")


def _is_number(value: object) -> bool:
    number = isinstance(value, int | float) and not isinstance(value, bool)
    return number and abs(float(str(value))) <= 1e12
