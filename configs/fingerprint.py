"""A stable SHA-256 of settings: the same for the same meaning, however written."""

import hashlib
import json
from typing import Any

from pydantic import BaseModel


def fingerprint(settings: BaseModel) -> str:
    """64 hexadecimal digits that depend on the kind and every value of ``settings``.

    Order of keys, comments, layout, defaults written out or left out, 1 or 1.0 for a
    float make no difference.
    """
    return hashlib.sha256(canonical_json(settings).encode("ascii")).hexdigest()


def canonical_json(settings: BaseModel) -> str:
    """``settings`` as ASCII JSON: sorted keys, no spaces, shortest exact floats."""
    meaning = {"kind": type(settings).__name__, "settings": settings.model_dump()}
    return json.dumps(
        _canonical(meaning), sort_keys=True, separators=(",", ":"), allow_nan=False
    )


def _canonical(value: Any) -> Any:
    if isinstance(value, dict):
        return {str(k): _canonical(v) for k, v in value.items()}
    if isinstance(value, list | tuple):
        return [_canonical(v) for v in value]
    # Negative zero equals zero and must not look different.
    return value + 0.0 if isinstance(value, float) else value
