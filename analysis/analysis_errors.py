"""What can go wrong in pure computing.

AnalysisError
├── InputRefused   a file or a value is not what it must be (exit 2)
└── NoResult       the data are well formed but support no result (exit 6)
    └── AmbiguousOrders   they support several pitches alike
"""


class AnalysisError(Exception):
    """Base of all errors of this folder; the message is one or two plain lines."""


class InputRefused(AnalysisError):
    """Raised when something given (a file, a row, an array) breaks its rules.

    ``file``, ``line`` (1-based), ``column`` and ``value`` say where as far as it is
    known; ``allowed`` says what would be accepted.
    """

    def __init__(
        self,
        problem: str,
        *,
        allowed: str = "",
        file: str = "",
        line: int | None = None,
        column: str | None = None,
        value: str | None = None,
    ) -> None:
        self.problem = problem
        self.allowed = allowed
        self.file = file
        self.line = line
        self.column = column
        self.value = value
        ending = f"\nAllowed: {allowed}" if allowed else ""
        super().__init__(f"{self._place()}{problem}{ending}")

    def _place(self) -> str:
        parts = [self.file] if self.file else []
        if self.line is not None:
            parts.append(f"line {self.line}")
        if self.column is not None:
            parts.append(f"column {self.column}")
        if self.value is not None:
            parts.append(f"value {shortened(self.value)}")
        return f"{', '.join(parts)}: " if parts else ""


class NoResult(AnalysisError):
    """Raised when the data do not support a result; says why and what would help."""

    def __init__(self, reason: str, *, remedy: str = "") -> None:
        self.reason = reason
        self.remedy = remedy
        super().__init__(f"{reason}\n{remedy}" if remedy else reason)


class AmbiguousOrders(NoResult):
    """Raised when spots fit several pitches alike; ``remedy`` says what decides."""


def shortened(text: str, *, length: int = 60) -> str:
    """``text`` quoted on one line, at most about ``length`` characters."""
    quoted = repr(text)
    return quoted if len(quoted) <= length else f"{quoted[: length - 3]}...'"
