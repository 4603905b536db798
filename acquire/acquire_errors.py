"""What can go wrong between a job and its report.

Refusals and trips of the gate are pitchsweep.safety's errors and pass through.

AcquireError
├── JobRefused       the job cannot be swept as written (exit 2)
├── RunRefused       a run folder, journal or input cannot be used (exit 2)
├── StorageFailed    a frame could not be kept, or does not read back (exit 4)
├── FaultMet         light, spots, air or disk are not as they should be (exit 4)
└── SweepStopped     stopped on request or for want of space; can be resumed (exit 5)
"""

from pathlib import Path

from pitchsweep.configs.typed_command import typed


class AcquireError(Exception):
    """Any failure of this room; ``str()`` is one or two plain lines."""


class JobRefused(AcquireError):
    """Raised before anything moves when a job cannot be swept as written."""

    def __init__(self, job: str, reason: str, advice: str = "") -> None:
        self.job = job
        self.reason = reason
        super().__init__(f"job '{job}' refused: {reason}" + _line(advice))


class RunRefused(AcquireError):
    """Raised when a run folder, journal, table or frame set cannot be used."""

    def __init__(self, path: Path, reason: str, advice: str = "") -> None:
        self.path = path
        self.reason = reason
        super().__init__(f"{path}: {reason}" + _line(advice))


class StorageFailed(AcquireError):
    """Raised when a frame was not kept durably or is not what was stored."""

    def __init__(self, path: Path, reason: str, advice: str = "") -> None:
        self.path = path
        self.reason = reason
        super().__init__(f"{path}: {reason}" + _line(advice))


class FaultMet(AcquireError):
    """Raised at a step for a fault of no single device; ``kind`` as in the recipe."""

    def __init__(self, kind: str, detail: str) -> None:
        self.kind = kind
        self.detail = detail
        super().__init__(f"{kind.replace('_', ' ')}: {detail}")


class SweepStopped(AcquireError):
    """Raised when a sweep ends early and can be resumed; ``run`` is its folder."""

    def __init__(self, run: Path, reason: str) -> None:
        self.run = run
        self.reason = reason
        super().__init__(
            f"stopped, dark: {reason}\n  go on with: {typed('sweep', '--resume', run)}"
        )


def _line(advice: str) -> str:
    return f"\n  {advice}" if advice else ""
