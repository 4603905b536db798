"""Reads dialects from YAML: those that ship, by name, and a file's text (acts)."""

from importlib import resources

import yaml

from pitchsweep.drivers.dialect import Dialect
from pitchsweep.drivers.driver_errors import AskedIllegal


def shipped_dialect_names() -> tuple[str, ...]:
    """The names of the dialects that ship, sorted."""
    folder = resources.files("pitchsweep.configs") / "dialects"
    names = (entry.name for entry in folder.iterdir())
    return tuple(sorted(n.removesuffix(".yaml") for n in names if n.endswith(".yaml")))


def shipped_dialect_mapping(name: str) -> object:
    """The plain mapping of the shipped dialect ``name``, to be handed to a process.

    Raises AskedIllegal for a name that does not ship.
    """
    if name not in shipped_dialect_names():
        raise AskedIllegal("dialect", name, ", ".join(shipped_dialect_names()))
    path = resources.files("pitchsweep.configs") / "dialects" / f"{name}.yaml"
    return yaml.safe_load(path.read_text(encoding="utf-8"))


def shipped_dialect(name: str) -> Dialect:
    """The shipped dialect ``name``."""
    return Dialect.from_mapping(shipped_dialect_mapping(name))
