"""A few of the emission faults; all of them run in tests/benchmarks/emission_faults.py.

The unit's log is the judge. Bounds: the unit's own drop-out, plus
the age at which a heartbeat is stale; a loaded computer is allowed half a second more.
"""

from pathlib import Path

import pytest
from faults.emission_judge import (
    CONTROLLER_FAULTS,
    Verdict,
    judge,
    judge_clock,
    judge_controller,
    judge_stuck_shutter,
)
from faults.emission_scenes import SCENES
from faults.emission_world import Scene

LATE_S = 0.5
HERE = {
    "guard stopped",
    "one channel only",
    "heartbeat stale",
    "power above limit",
    "cable pulled",
    "port taken by another",
    "settings edited",
    "permit ends",
    "guard killed, pulses",
}


def check(found: Verdict) -> None:
    assert found.stayed_dark and found.refused
    assert found.dark_s <= found.bound_s + LATE_S


@pytest.mark.parametrize(
    "scene", [s for s in SCENES if s.name in HERE], ids=lambda s: str(s.name)
)
def test_each_fault_means_dark_and_nothing_goes_on(
    scene: Scene, tmp_path: Path
) -> None:
    check(judge(scene, tmp_path, 0.05))


@pytest.mark.parametrize("name", ["both stopped (suspended)", "controller killed"])
def test_a_controller_that_fails_means_dark(name: str, tmp_path: Path) -> None:
    assert name in CONTROLLER_FAULTS
    check(judge_controller(name, tmp_path, 0.05))


def test_a_clock_set_back_means_dark(tmp_path: Path) -> None:
    check(judge_clock(tmp_path, 0.05))


@pytest.mark.parametrize("word", ["stick", "jam"])
def test_a_shutter_that_does_not_shut_latches(word: str, tmp_path: Path) -> None:
    assert judge_stuck_shutter(tmp_path, word) == ("light-stuck", True)
