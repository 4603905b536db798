"""What a settings key allows, in words, derived from the model's own schema."""

from collections.abc import Mapping
from functools import cache
from typing import Any

from pydantic import BaseModel

from pitchsweep.configs.settings_base import NAME_PATTERN
from pitchsweep.configs.yaml_lines import KeyPath

Schema = Mapping[str, Any]


def allowed_text(model: type[BaseModel], path: KeyPath) -> str:
    """What may stand at ``path`` of ``model``: "20 to 5000", "true or false", ...

    ``path`` is a tuple of keys and list indices; a path the model does not have
    gives an empty text.
    """
    root = _schema(model)
    node = _at(root, path)
    return "" if node is None else _words(root, node)


def allowed_keys(model: type[BaseModel], path: KeyPath) -> tuple[str, ...]:
    """The keys that the block at ``path`` of ``model`` may hold, in their order."""
    node = _at(_schema(model), path)
    return () if node is None else tuple(node.get("properties", {}))


@cache
def _schema(model: type[BaseModel]) -> Schema:
    return model.model_json_schema()


def _at(root: Schema, path: KeyPath) -> Schema | None:
    node: Schema | None = _resolved(root, root)
    for part in path:
        if node is None:
            return None
        child = _item(node, part) if isinstance(part, int) else _member(node, part)
        node = None if child is None else _resolved(root, child)
    return node


def _resolved(root: Schema, node: Schema) -> Schema:
    """``node`` with its reference followed and an optional's null left out."""
    if "$ref" in node:
        name = str(node["$ref"]).rpartition("/")[2]
        return _resolved(root, root["$defs"][name])
    choices = [c for c in node.get("anyOf", ()) if c.get("type") != "null"]
    return _resolved(root, choices[0]) if len(choices) == 1 else node


def _member(node: Schema, key: str) -> Schema | None:
    if key in node.get("properties", {}):
        return dict(node["properties"][key])
    for free in node.get("patternProperties", {}).values():
        return dict(free)
    free = node.get("additionalProperties")
    return free if isinstance(free, dict) else None


def _item(node: Schema, index: int) -> Schema | None:
    places = node.get("prefixItems", ())
    if places:
        return dict(places[min(index, len(places) - 1)])
    items = node.get("items")
    return items if isinstance(items, dict) else None


def _words(root: Schema, node: Schema) -> str:
    if "const" in node:
        return _scalar(node["const"])
    if "enum" in node:
        return _either([_scalar(choice) for choice in node["enum"]])
    kind = node.get("type")
    if kind in ("number", "integer"):
        return _range(node, "a number" if kind == "number" else "a whole number")
    if kind == "boolean":
        return "true or false"
    if kind == "array":
        return _list_words(root, node)
    return _text_words(node) if kind == "string" else _block_words(node)


def _range(node: Schema, noun: str) -> str:
    low, high = node.get("minimum"), node.get("maximum")
    above, below = node.get("exclusiveMinimum"), node.get("exclusiveMaximum")
    whole = "" if noun == "a number" else f"{noun} "
    if low is not None and high is not None:
        return f"{whole}{_scalar(low)} to {_scalar(high)}"
    words = [noun] if noun != "a number" else []
    if low is not None:
        words.append(f"at least {_scalar(low)}")
    if above is not None:
        words.append(f"above {_scalar(above)}")
    if high is not None:
        words.append(f"up to {_scalar(high)}")
    if below is not None:
        words.append(f"below {_scalar(below)}")
    return " ".join(words) or noun


def _list_words(root: Schema, node: Schema) -> str:
    least, most = node.get("minItems"), node.get("maxItems")
    count = str(least) if least == most else f"{least or 0} to {most or 'any number'}"
    inner = _item(node, 0)
    each = "" if inner is None else f", each {_words(root, _resolved(root, inner))}"
    return f"a list of {count}{each}"


def _text_words(node: Schema) -> str:
    pattern = node.get("pattern")
    if pattern == NAME_PATTERN:
        return "a name of letters, digits, '.', '_', '-' (at most 64, no other sign)"
    if pattern is not None:
        return f"text that matches {pattern}"
    if "maxLength" in node:
        return f"text of {node.get('minLength', 0)} to {node['maxLength']} characters"
    return "text"


def _block_words(node: Schema) -> str:
    keys = tuple(node.get("properties", {}))
    if keys:
        return f"a block with keys {', '.join(keys)}"
    least, most = node.get("minProperties", 0), node.get("maxProperties")
    return f"a block of {least} to {most} names" if most else "a block of names"


def _scalar(value: Any) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    return f"{value:g}" if isinstance(value, float) else str(value)


def _either(words: list[str]) -> str:
    return " or ".join(words)
