"""The repository as the tests see it: its root, its folders, git's list of files."""

import shutil
import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent

# In the order in which imports may point: a folder sees itself and those before it.
FOLDERS = ("configs", "analysis", "drivers", "safety", "acquire")


def tracked_files(*below: str) -> list[str]:
    """Paths that git tracks under ``below``, relative to the root, with slashes."""
    if shutil.which("git") is None or not (ROOT / ".git").exists():
        pytest.skip("needs a git clone: compares with git's list of files")
    # A clone may belong to another user than the one who runs the suite.
    git = ["git", "-c", f"safe.directory={ROOT}", "-C", str(ROOT)]
    listed = subprocess.run(
        [*git, "ls-files", "-z", "--", *below],
        check=True,
        capture_output=True,
        text=True,
    )
    return [name for name in listed.stdout.split("\0") if name]


def python_files() -> list[Path]:
    """Every Python file in the five folders, on disk, sorted."""
    found = (path for folder in FOLDERS for path in (ROOT / folder).rglob("*.py"))
    return sorted(found)
