"""What can go wrong when settings are read.

ConfigError                 (exit code 2)
+-- SettingsRefused         a file was found wanting; names every place
"""

from collections.abc import Sequence
from dataclasses import dataclass

MOST_LINES = 5
LONGEST_VALUE = 60
LONGEST_SAYING = 240


def printable(text: str, longest: int = LONGEST_VALUE) -> str:
    """``text`` on one line, safe for any terminal, cut to ``longest`` characters."""
    safe = "".join(c if c.isprintable() else repr(c)[1:-1] for c in text)
    return safe if len(safe) <= longest else safe[: longest - 3] + "..."


@dataclass(frozen=True)
class Problem:
    """One thing wrong in a settings file: where, what stands there, what may.

    ``line`` counts from 1, None where no line can be named; ``key`` is the dotted
    path, empty for the whole file; ``value`` is the text as written, None where
    nothing is; ``saying`` tells what is allowed or what to do.
    """

    file: str
    line: int | None
    key: str
    value: str | None
    saying: str

    def __str__(self) -> str:
        place = self.file if self.line is None else f"{self.file} line {self.line}"
        key = printable(self.key, 120)
        subject = key if self.value is None else f"{key} = {printable(self.value)}"
        saying = printable(self.saying, LONGEST_SAYING)
        return f"{place}: {subject}: {saying}" if subject else f"{place}: {saying}"


class ConfigError(Exception):
    """Base of everything that this folder raises on purpose."""

    exit_code = 2


class SettingsRefused(ConfigError):
    """Raised when a settings file cannot be used; nothing has moved yet.

    ``problems`` holds every place found wanting; the message shows at most five
    lines, one a place.
    """

    def __init__(self, problems: Sequence[Problem]) -> None:
        self.problems = tuple(problems)
        super().__init__(_message(self.problems))


def _message(problems: tuple[Problem, ...]) -> str:
    if len(problems) <= MOST_LINES:
        return "\n".join(str(p) for p in problems)
    shown = [str(p) for p in problems[: MOST_LINES - 1]]
    return "\n".join([*shown, f"and {len(problems) - len(shown)} more problems"])
