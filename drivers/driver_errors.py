"""What can go wrong with a device.

DriverError
├── AskedIllegal       we asked, or a dialect describes, what is not allowed
├── AnsweredNonsense   the device answered what the dialect does not know
├── LineBroke          the port or the socket failed or is in use elsewhere
├── NoAnswerInTime     nothing (or only late answers) before the deadline
└── DeviceRefused      the device answered properly, and the answer is a fault
"""

from typing import Literal

RefusalReason = Literal[
    "declined",
    "not-homed",
    "stalled",
    "still-turning",
    "wrong-place",
    "wrong-device",
    "stale",
    "identical",
    "wrong-frame",
    "black",
    "white",
    "automatic",
]


class DriverError(Exception):
    """Any fault of a device, of its line or of what we asked of it."""


class AskedIllegal(DriverError):
    """Raised before anything is sent: a question, value or dialect key not allowed."""

    def __init__(self, what: str, value: object, allowed: str) -> None:
        super().__init__(f"{what}: {value!r} is not allowed; allowed: {allowed}")
        self.what = what
        self.value = value
        self.allowed = allowed


class AnsweredNonsense(DriverError):
    """Raised when bytes arrive that the dialect does not know or did not expect."""

    def __init__(self, device: str, line: bytes, why: str) -> None:
        super().__init__(f"{device} answered {line[:80]!r}: {why}")
        self.device = device
        self.line = line
        self.why = why


class LineBroke(DriverError):
    """Raised when a port or socket cannot be opened, read, written or locked."""

    def __init__(self, line: str, doing: str, cause: object) -> None:
        super().__init__(f"{line}: {doing} failed: {cause}")
        self.line = line
        self.doing = doing
        self.cause = cause


class NoAnswerInTime(DriverError):
    """Raised when the deadline of a question passes without its answer."""

    def __init__(self, device: str, ask: str, timeout_s: float) -> None:
        super().__init__(f"{device} did not answer '{ask}' within {timeout_s:g} s")
        self.device = device
        self.ask = ask
        self.timeout_s = timeout_s


class DeviceRefused(DriverError):
    """Raised when a device declines, stalls, is elsewhere or is not the one meant."""

    def __init__(self, device: str, reason: RefusalReason, detail: str) -> None:
        super().__init__(f"{device}: {reason}: {detail}")
        self.device = device
        self.reason: RefusalReason = reason
        self.detail = detail
