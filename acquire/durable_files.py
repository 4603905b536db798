"""Writes files that are there, whole, after a power cut. This module acts (disk)."""

import os
from pathlib import Path


def write_durably(path: Path, data: bytes | memoryview) -> None:
    """Puts ``data`` at ``path``: a temporary file, fsync, rename, fsync the folder.

    ``path`` holds the old content or the new one, never a part. Raises OSError; the
    temporary file is then gone.
    """
    temporary = path.with_name(f".{path.name}.part")
    try:
        with open(temporary, "wb") as handle:
            handle.write(data)
            handle.flush()
            os.fsync(handle.fileno())
        os.replace(temporary, path)
    except BaseException:
        temporary.unlink(missing_ok=True)
        raise
    sync_folder(path.parent)


def sync_folder(folder: Path) -> None:
    """Makes renames in ``folder`` durable where the system can (not on Windows)."""
    try:
        handle = os.open(folder, os.O_RDONLY)
    except (OSError, AttributeError):
        return
    try:
        os.fsync(handle)
    finally:
        os.close(handle)
