"""Every error and its exit code, in one table; its text for stderr (pure).

0 done, 2 input refused, 3 gate refused or tripped, 4 device fault, 5 stopped and can be
resumed, 6 data do not support a result.
"""

DONE, REFUSED, GATE, DEVICE, STOPPED, NO_RESULT = 0, 2, 3, 4, 5, 6


def exit_table() -> tuple[tuple[type[BaseException], int], ...]:
    """(error, code), the first that fits counts.

    Read when something went wrong only, so that asking for help stays quick.
    """
    from sqlite3 import Error as SqliteError

    from pitchsweep.acquire.acquire_errors import (
        AcquireError,
        JobRefused,
        RunRefused,
        StorageFailed,
        SweepStopped,
    )
    from pitchsweep.analysis.analysis_errors import (
        AnalysisError,
        InputRefused,
        NoResult,
    )
    from pitchsweep.configs.config_errors import ConfigError
    from pitchsweep.drivers.driver_errors import DriverError
    from pitchsweep.safety.safety_errors import SafetyError, SignerRefused

    return (
        (ConfigError, REFUSED),
        (JobRefused, REFUSED),
        (RunRefused, REFUSED),
        (InputRefused, REFUSED),
        (SignerRefused, REFUSED),
        (SafetyError, GATE),
        (DriverError, DEVICE),
        (StorageFailed, DEVICE),
        (SweepStopped, STOPPED),
        (NoResult, NO_RESULT),
        (AnalysisError, REFUSED),
        (AcquireError, DEVICE),
        (KeyboardInterrupt, STOPPED),
        (SqliteError, DEVICE),
        (OSError, DEVICE),
        (MemoryError, DEVICE),
    )


def exit_code_of(error: BaseException) -> int:
    """The exit code of an error; a fault of the program itself counts as a device's."""
    for kind, code in exit_table():
        if isinstance(error, kind):
            return code
    return DEVICE


def message_of(error: BaseException) -> str:
    """What stderr says: one or two plain lines (a few more for several settings)."""
    if isinstance(error, KeyboardInterrupt):
        return "stopped"
    if isinstance(error, OSError) and type(error).__module__ == "builtins":
        where = f"{error.filename}: " if error.filename else ""
        return f"{where}{error.strerror or error}\n  {_advice(error)}"
    if isinstance(error, MemoryError):
        return "out of memory\n  close other programs, or use smaller frames"
    known = any(isinstance(error, kind) for kind, _ in exit_table())
    if known:
        return str(error) or type(error).__name__
    text = " ".join(str(error).split())[:200]
    return (
        f"a fault of the program itself: {type(error).__name__}: {text}\n"
        "  please report it with the command and the files; the bench was left dark"
    )


def _advice(error: OSError) -> str:
    if isinstance(error, PermissionError):
        return "choose a folder in which you may write, or ask for the rights"
    if error.strerror and "space" in error.strerror:
        return "make space on that disk, then try again"
    return "check the path and the disk, then try again"
