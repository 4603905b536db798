"""Noise of a step that is taken again: the same, or fresh where it is asked for."""

from pathlib import Path

from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.twin.repeated_steps import RepeatedSteps


def label(step: int, exposure: int) -> Label:
    return Label(0, "red", 2, step, exposure)


def test_every_attempt_at_a_step_has_noise_of_its_own(tmp_path: Path) -> None:
    steps = RepeatedSteps(tmp_path)
    first = [steps.fresh(label(1, exposure)) for exposure in (2, 3, 0, 1)]
    assert first == [label(1, exposure) for exposure in (2, 3, 0, 1)]
    assert steps.fresh(label(2, 0)) == label(2, 0)
    again = [steps.fresh(label(1, exposure)).repeat for exposure in (2, 3, 0, 1)]
    third = [steps.fresh(label(1, exposure)).repeat for exposure in (2, 3)]
    assert len(set(again)) == len(set(third)) == 1
    assert len({2, again[0], third[0]}) == 3


def test_attempts_outlive_a_killed_twin_and_a_step_cut_short_is_one(
    tmp_path: Path,
) -> None:
    RepeatedSteps(tmp_path).fresh(label(1, 0))
    with (tmp_path / "exposed.jsonl").open("a") as file:
        file.write('[0, "red", 2,')  # killed in mid-line
    later = RepeatedSteps(tmp_path)
    again = later.fresh(label(1, 0)).repeat
    assert again != 2 and later.fresh(label(1, 1)).repeat == again
