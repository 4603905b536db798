"""Where running guards are found, so that anyone of this user can make it dark (acts).

One folder per user, the same from every terminal whatever its environment; one socket
and one small file per guard. A connection to the socket *is* the request: nothing has
to be said and no secret is needed. The guard answers in one line.
"""

import json
import os
import socket
import stat
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path

FOLDER_VARIABLE = "PITCHSWEEP_GUARDS"
"""Another folder, for tests: guards started elsewhere are then not found here."""
ANSWER_WAIT_S = 2.0
GONE = "gone"
"""The state of a guard that ended without tidying up; its unit is dark by itself."""


@dataclass(frozen=True)
class RunningGuard:
    """A guard that said it was there: process number, run, unit, its socket."""

    pid: int
    run: str
    unit: str
    socket: Path


@dataclass(frozen=True)
class DarkAnswer:
    """What a guard answered; ``answered`` is False when it said nothing in time."""

    guard: RunningGuard
    answered: bool
    state: str = ""
    light_on: bool | None = None


def guards_folder() -> Path:
    """The folder of this user's running guards."""
    return Path(
        os.environ.get(FOLDER_VARIABLE) or f"/tmp/pitchsweep-guards-{os.getuid()}"
    )


def own_folder(folder: Path) -> Path:
    """``folder``, made if missing; OSError when it is not this user's alone."""
    with suppress(FileExistsError):
        folder.mkdir(mode=0o700)
    found = folder.lstat()
    if not stat.S_ISDIR(found.st_mode) or found.st_uid != os.getuid():
        raise OSError(f"{folder} is not a folder of this user")
    if found.st_mode & 0o077:
        folder.chmod(0o700)
    return folder


def find_guards(folder: Path | None = None) -> list[RunningGuard]:
    """The guards that are there, oldest first; what the dead left is removed."""
    place = guards_folder() if folder is None else folder
    if not place.is_dir():
        return []
    found = []
    for note in sorted(place.glob("*.json"), key=lambda path: path.name):
        guard = _read_note(note)
        if guard is None or not _is_there(guard):
            _remove(note)
        else:
            found.append(guard)
    return found


def tell_dark(guard: RunningGuard, wait_s: float = ANSWER_WAIT_S) -> DarkAnswer:
    """Tells ``guard`` to go dark and latch; what it answers within ``wait_s``."""
    try:
        with socket.socket(socket.AF_UNIX, socket.SOCK_STREAM) as line:
            line.settimeout(wait_s)
            line.connect(str(guard.socket))
            with line.makefile("rb") as stream:
                said = json.loads(stream.readline(1000))
        return DarkAnswer(guard, True, str(said["state"]), bool(said["light_on"]))
    except (ConnectionRefusedError, FileNotFoundError):
        # Nobody listens: the process of that number is another one by now.
        _remove(guard.socket.with_suffix(".json"))
        return DarkAnswer(guard, True, GONE)
    except (OSError, ValueError, KeyError, TypeError):
        return DarkAnswer(guard, False)


def _read_note(note: Path) -> RunningGuard | None:
    try:
        said = json.loads(note.read_text(encoding="utf-8"))
        return RunningGuard(
            pid=int(said["pid"]),
            run=str(said["run"]),
            unit=str(said["unit"]),
            socket=note.with_suffix(".socket"),
        )
    except (OSError, ValueError, KeyError, TypeError):
        return None


def _is_there(guard: RunningGuard) -> bool:
    """Whether a process of that number lives; a doubtful one counts as there."""
    try:
        os.kill(guard.pid, 0)
    except ProcessLookupError:
        return False
    except OSError:
        return True
    return guard.socket.exists()


def _remove(note: Path) -> None:
    for path in (note, note.with_suffix(".socket")):
        with suppress(OSError):
            path.unlink()
