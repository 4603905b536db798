"""What the guard loads of this folder stays small."""

import subprocess
import sys

import pytest

LOADED_BY_GUARD = [
    "dialect",
    "transport",
    "serial_transport",
    "line_client",
    "emission_client",
]
HEAVY = {"numpy", "cv2", "scipy", "pydantic", "yaml", "matplotlib"}


@pytest.mark.parametrize("module", LOADED_BY_GUARD)
def test_modules_of_the_guard_load_nothing_heavy(module: str) -> None:
    code = f"import sys, pitchsweep.drivers.{module}; print(*sys.modules)"
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True
    )
    assert not HEAVY & {name.split(".")[0] for name in done.stdout.split()}
