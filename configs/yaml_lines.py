"""Plain YAML that remembers its lines. Pure: text in, a document or a refusal out.

Accepted is a small, unsurprising part of YAML: mappings with text keys, lists (they
become tuples), text, decimal numbers, true, false, null. So ``no``, ``on``, ``1:30``
and dates stay text, ``010`` is ten and ``1e-5`` is a number. Refused are tags,
anchors, aliases, duplicate keys, deep nesting, several documents and large files.
"""

import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, NoReturn

import yaml

from pitchsweep.configs.config_errors import Problem, SettingsRefused, printable

KeyPath = tuple[str | int, ...]

LARGEST_FILE_BYTES = 256 * 1024
DEEPEST_NESTING = 12
LONGEST_NUMBER = 40

NULLS = ("", "~", "null", "Null", "NULL")
BOOLEANS = {
    **dict.fromkeys(("true", "True", "TRUE"), True),
    **dict.fromkeys(("false", "False", "FALSE"), False),
}
INTEGER = re.compile(r"[-+]?[0-9]+\Z")
DECIMAL = re.compile(r"[-+]?(\.[0-9]+|[0-9]+(\.[0-9]*)?)([eE][-+]?[0-9]+)?\Z")
NOT_FINITE = {
    **dict.fromkeys((".inf", ".Inf", ".INF", "+.inf", "+.Inf", "+.INF"), "inf"),
    **dict.fromkeys(("-.inf", "-.Inf", "-.INF"), "-inf"),
    **dict.fromkeys((".nan", ".NaN", ".NAN"), "nan"),
}


@dataclass(frozen=True)
class YamlDocument:
    """A parsed file: its top mapping, and line and text as written of every place."""

    name: str
    value: dict[str, Any]
    lines: Mapping[KeyPath, int]
    written: Mapping[KeyPath, str]

    def line(self, path: KeyPath) -> int | None:
        """The line of ``path``, or of the nearest block around it that exists."""
        while path and path not in self.lines:
            path = path[:-1]
        return self.lines.get(path)


def parse_yaml(data: bytes | str, name: str) -> YamlDocument:
    """The document in ``data``, called ``name`` in messages.

    Raises SettingsRefused naming file and line when it is not the plain YAML
    described at the head of this file, or not a mapping at its top.
    """
    text = _decoded(data, name)
    node = _composed(text, name)
    if not isinstance(node, yaml.MappingNode):
        line = 1 if node is None else node.start_mark.line + 1
        _refuse(name, line, "", None, "must hold 'key: value' lines")
    reading = _Reading(name)
    value = reading.mapping(node, ())
    return YamlDocument(name, value, reading.lines, reading.written)


def dotted(path: KeyPath) -> str:
    """``path`` as people write it: ``lasers.red.power_mw``, ``exposures_ms[1]``."""
    text = ""
    for part in path:
        joint = f"[{part}]" if isinstance(part, int) else f".{part}"
        text += joint
    return text.removeprefix(".")


def plain_value(text: str) -> Any:
    """What an unquoted scalar means: None, bool, int, float or the text itself."""
    if text in NULLS:
        return None
    if text in BOOLEANS:
        return BOOLEANS[text]
    if text in NOT_FINITE:
        return float(NOT_FINITE[text])
    if INTEGER.match(text) and len(text) <= LONGEST_NUMBER:
        return int(text)
    return float(text) if DECIMAL.match(text) else text


def _decoded(data: bytes | str, name: str) -> str:
    if len(data) > LARGEST_FILE_BYTES:
        allowed = f"allowed at most {LARGEST_FILE_BYTES} bytes"
        _refuse(name, None, "", None, f"the file has {len(data)} bytes; {allowed}")
    if isinstance(data, str):
        return data
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        _refuse(name, line, "", None, "is not UTF-8 text; save the file as UTF-8")


def _composed(text: str, name: str) -> yaml.Node | None:
    try:
        loader = _PlainLoader(text)
        return loader.get_single_node()
    except yaml.MarkedYAMLError as error:
        mark = error.problem_mark or error.context_mark
        line = None if mark is None else mark.line + 1
        _refuse(name, line, "", None, f"not plain YAML: {error.problem}")
    except yaml.reader.ReaderError as error:
        line = text[: error.position].count("\n") + 1
        _refuse(name, line, "", None, "holds a character that no text file may hold")
    except (ValueError, OverflowError):
        _refuse(name, None, "", None, "not plain YAML: an escape names no character")


class _PlainLoader(yaml.SafeLoader):
    """Composes nodes only; refuses what could surprise, with its line."""

    def __init__(self, text: str) -> None:
        super().__init__(text)
        self._depth = 0

    def compose_node(self, parent: yaml.Node | None, index: Any) -> yaml.Node | None:
        event = self.peek_event()  # type: ignore[no-untyped-call]
        if isinstance(event, yaml.AliasEvent) or event.anchor is not None:
            self._stop(event, "anchors (&) and aliases (*) are not allowed")
        if getattr(event, "tag", None) is not None:
            self._stop(event, "tags (!) are not allowed")
        if self._depth > DEEPEST_NESTING:
            self._stop(event, f"nested deeper than {DEEPEST_NESTING} blocks")
        self._depth += 1
        try:
            return super().compose_node(parent, index)
        finally:
            self._depth -= 1

    def _stop(self, event: Any, why: str) -> NoReturn:
        raise yaml.MarkedYAMLError(problem=why, problem_mark=event.start_mark)


class _Reading:
    """Turns nodes into values while noting line and text of every place."""

    def __init__(self, name: str) -> None:
        self.name = name
        self.lines: dict[KeyPath, int] = {(): 1}
        self.written: dict[KeyPath, str] = {}

    def mapping(self, node: yaml.MappingNode, path: KeyPath) -> dict[str, Any]:
        self.written[path] = f"a block of {len(node.value)} keys"
        found: dict[str, Any] = {}
        for key_node, value_node in node.value:
            key = self._key(key_node, path)
            line = key_node.start_mark.line + 1
            if key in found:
                first = self.lines[(*path, key)]
                where = dotted((*path, key))
                _refuse(self.name, line, where, None, f"given twice, first on {first}")
            self.lines[(*path, key)] = line
            found[key] = self._value(value_node, (*path, key))
        return found

    def _key(self, node: yaml.Node, path: KeyPath) -> str:
        if isinstance(node, yaml.ScalarNode):
            return str(node.value)
        line = node.start_mark.line + 1
        _refuse(self.name, line, dotted(path), None, "a key must be plain text")

    def _value(self, node: yaml.Node, path: KeyPath) -> Any:
        self.lines.setdefault(path, node.start_mark.line + 1)
        if isinstance(node, yaml.MappingNode):
            return self.mapping(node, path)
        if isinstance(node, yaml.SequenceNode):
            self.written[path] = f"a list of {len(node.value)}"
            items = enumerate(node.value)
            return tuple(self._value(item, (*path, i)) for i, item in items)
        text = str(node.value)
        plain = isinstance(node, yaml.ScalarNode) and node.style is None
        self.written[path] = (text or "(nothing)") if plain else f"'{text}'"
        return plain_value(text) if plain else text


def _refuse(
    name: str, line: int | None, key: str, value: str | None, saying: str
) -> NoReturn:
    raise SettingsRefused([Problem(printable(name, 200), line, key, value, saying)])
