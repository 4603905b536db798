"""The plain part of YAML: what is read, what is refused and on which line."""

import pytest

from pitchsweep.configs.config_errors import SettingsRefused
from pitchsweep.configs.yaml_lines import dotted, parse_yaml


def test_values_are_what_they_look_like() -> None:
    text = """
    number: 1e-5
    whole: 010
    letter: no
    angle: 1:30
    day: 2024-01-02
    truth: true
    nothing: ~
    quoted: "12"
    list: [1, 2.5, off]
    """
    assert parse_yaml(text, "x").value == {
        "number": 1e-5,
        "whole": 10,
        "letter": "no",
        "angle": "1:30",
        "day": "2024-01-02",
        "truth": True,
        "nothing": None,
        "quoted": "12",
        "list": (1, 2.5, "off"),
    }


def test_lines_are_remembered() -> None:
    document = parse_yaml("a: 1\nb:\n  c: 2\n  d:\n    - 5\n    - 6\n", "x")
    assert document.line(("b", "c")) == 3
    assert document.line(("b", "d", 1)) == 6
    assert document.line(("b", "missing")) == 2
    assert document.line(("missing",)) == 1
    assert dotted(("b", "d", 1)) == "b.d[1]"


@pytest.mark.parametrize(
    ("text", "line", "words"),
    [
        ("a: 1\nb: 2\na: 3\n", 3, "given twice, first on 1"),
        ("a: 1\nb: &x [1]\n", 2, "anchors"),
        ("a: &x 1\nb: *x\n", 1, "anchors"),
        ("a: 1\nb: *x\n", 2, "aliases"),
        ("a: !!python/object/apply:os.system [ls]\n", 1, "tags"),
        ("a: 1\nb: !!float 3\n", 2, "tags"),
        ("a: 1\n---\nb: 2\n", 2, "document"),
        ("- 1\n", 1, "key: value"),
        ("", 1, "key: value"),
        ("a: [1\nb: 2\n", 2, "not plain YAML"),
        ("a: 1\n\tb: 2\n", 2, "not plain YAML"),
        ("a: 1\n? [x, y]\n: 2\n", 2, "a key must be plain text"),
        ("a: " + "[" * 60 + "]" * 60, 1, "nested deeper"),
        ("a: 1\nb: \x01\n", 2, "character"),
    ],
)
def test_surprising_yaml_is_refused_with_its_line(
    text: str, line: int, words: str
) -> None:
    with pytest.raises(SettingsRefused) as caught:
        parse_yaml(text, "f.yaml")
    assert f"f.yaml line {line}: " in str(caught.value)
    assert words in str(caught.value)


def test_text_in_another_encoding_is_refused_with_its_line() -> None:
    with pytest.raises(SettingsRefused, match="f.yaml line 2: is not UTF-8"):
        parse_yaml("a: 1\nb: é\n".encode("latin-1"), "f.yaml")
    with pytest.raises(SettingsRefused, match="not UTF-8"):
        parse_yaml("a: 1\n".encode("utf-16"), "f.yaml")


def test_a_byte_order_mark_is_no_obstacle() -> None:
    assert parse_yaml(b"\xef\xbb\xbfa: 1\n", "x").value == {"a": 1}


def test_a_large_file_is_refused_unread() -> None:
    with pytest.raises(SettingsRefused, match="allowed at most 262144 bytes"):
        parse_yaml(b"a: 1\n" * 100_000, "f.yaml")
