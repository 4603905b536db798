"""A job as one complete YAML text and back, every float to the last bit."""

import re
from collections.abc import Mapping
from typing import Any

import yaml

from pitchsweep.configs.job_model import Job
from pitchsweep.configs.reader import settings_from
from pitchsweep.configs.yaml_lines import parse_yaml

HEAD = "# A frozen job: complete, with its bench, part and recipe. Not to be edited.\n"
PLAIN_TEXT = re.compile(r"[A-Za-z][A-Za-z0-9_/-]*\Z")
# Words that other YAML readers take for something else than text.
NOT_PLAIN = frozenset("null true false yes no on off y n".split())


def freeze(job: Job) -> str:
    """``job`` as YAML text that ``thaw`` turns back into an equal job."""
    return HEAD + plain_yaml(job.model_dump())


def plain_yaml(values: Mapping[str, Any]) -> str:
    """``values`` (text, numbers, None, tuples, mappings) as YAML our reader takes."""
    text = yaml.dump(
        dict(values),
        Dumper=_FrozenDumper,
        sort_keys=False,
        allow_unicode=False,
        default_flow_style=False,
        width=10**6,
    )
    return str(text)


def thaw(text: str, path: str) -> Job:
    """The job in ``text``, called ``path`` in messages. Raises SettingsRefused."""
    return settings_from(parse_yaml(text, path), Job)


class _FrozenDumper(yaml.SafeDumper):
    """Quotes whatever is not a plain word; writes no anchors; tuples as lists."""

    def ignore_aliases(self, data: Any) -> bool:
        return True


def _text(dumper: yaml.SafeDumper, text: str) -> yaml.ScalarNode:
    plain = PLAIN_TEXT.match(text) and text.lower() not in NOT_PLAIN
    style = None if plain else '"'
    return dumper.represent_scalar("tag:yaml.org,2002:str", text, style=style)


def _list(dumper: yaml.SafeDumper, items: tuple[Any, ...]) -> yaml.SequenceNode:
    return dumper.represent_sequence("tag:yaml.org,2002:seq", items, flow_style=True)


_FrozenDumper.add_representer(str, _text)
_FrozenDumper.add_representer(tuple, _list)
