"""Builds settings with one damaged place, from the model's own schema."""

from collections.abc import Iterator, Mapping
from copy import deepcopy
from dataclasses import dataclass
from typing import Any

from hypothesis import strategies as st
from pydantic import BaseModel

Schema = Mapping[str, Any]
KeyPath = tuple[str, ...]

MISSING = object()
NEW_KEY = "unheard_of"


@dataclass(frozen=True)
class Field:
    """A place in a model: its path, its resolved schema, may it be left out or null."""

    path: KeyPath
    schema: Schema
    required: bool
    nullable: bool

    def __str__(self) -> str:
        return ".".join(self.path)


def fields(model: type[BaseModel]) -> list[Field]:
    """Every key of ``model``, blocks and the blocks' keys included."""
    root = model.model_json_schema()
    return list(_walk(root, root, ()))


def _walk(root: Schema, node: Schema, path: KeyPath) -> Iterator[Field]:
    members = dict(node.get("properties", {}))
    named = node.get("patternProperties") or {}
    for free in [*named.values(), node.get("additionalProperties")]:
        if isinstance(free, Mapping):
            members["red"] = free
    for key, raw in members.items():
        schema, nullable = _resolve(root, raw)
        required = key in node.get("required", ())
        yield Field((*path, key), schema, required, nullable)
        yield from _walk(root, schema, (*path, key))


def _resolve(root: Schema, node: Schema) -> tuple[Schema, bool]:
    if "$ref" in node:
        return _resolve(root, root["$defs"][node["$ref"].split("/")[-1]])
    if "anyOf" in node:
        real = [c for c in node["anyOf"] if c.get("type") != "null"]
        return _resolve(root, real[0])[0], len(real) < len(node["anyOf"])
    return node, False


def damages(field: Field) -> st.SearchStrategy[Any]:
    """Values that ``field`` must not take, MISSING and {NEW_KEY: 1} included."""
    bad = [_wrong_type(field), st.just(float("nan")), st.just(float("-inf"))]
    if field.required:
        bad.append(st.just(MISSING))
    if not field.nullable:
        bad.append(st.none())
    schema = field.schema
    if schema.get("type") in ("number", "integer"):
        bad.extend(_out_of_range(schema))
    if "enum" in schema or "const" in schema:
        bad.append(st.sampled_from(["something-else", 77, 1.5, True]))
    if "properties" in schema:
        bad.append(st.just({NEW_KEY: 1}))
    if schema.get("type") == "array":
        if schema.get("minItems"):
            bad.append(st.just(()))
        bad.append(st.just(({"a": 1},) * 3))
        bad.append(st.just((True,) * 9))
    if schema.get("type") == "string":
        bad.extend([st.just(""), st.just("x" * 401)])
    return st.one_of(bad)


def _wrong_type(field: Field) -> st.SearchStrategy[Any]:
    kind = field.schema.get("type")
    values: list[Any] = [("a", "b"), {"a": 1}, 3, 2.5, True, "twelve"]
    if kind == "array":
        return st.sampled_from(values[1:])
    if kind == "object":
        return st.sampled_from([values[0], *values[2:]])
    if kind == "number":
        return st.sampled_from([*values[:2], *values[4:]])
    if kind == "boolean":
        return st.sampled_from([*values[:4], "yes", "no", "on", 0, 1])
    if kind == "integer" or "enum" in field.schema:
        return st.sampled_from([*values[:2], *values[3:]])
    return st.sampled_from(values[:5])


def _out_of_range(schema: Schema) -> Iterator[st.SearchStrategy[Any]]:
    if "minimum" in schema:
        yield st.just(schema["minimum"] - max(1, abs(schema["minimum"])))
    if "exclusiveMinimum" in schema:
        yield st.just(schema["exclusiveMinimum"])
        yield st.floats(max_value=-1e-300, allow_infinity=False)
    for key in ("maximum", "exclusiveMaximum"):
        if key in schema:
            yield st.just(schema[key] + max(1, abs(schema[key])))


def damaged(values: dict[str, Any], path: KeyPath, value: Any) -> dict[str, Any]:
    """A copy of ``values`` with ``value`` at ``path``; MISSING takes the key away."""
    copy = deepcopy(values)
    block = copy
    for key in path[:-1]:
        block = block[key]
    if value is MISSING:
        del block[path[-1]]
    elif isinstance(value, dict) and NEW_KEY in value:
        block[path[-1]] = {**(block.get(path[-1]) or {}), **value}
    else:
        block[path[-1]] = value
    return copy
