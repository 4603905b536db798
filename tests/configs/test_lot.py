"""A job of several parts: how it is written, what is refused, what it is bound to."""

from pathlib import Path

import pytest

from pitchsweep.configs.config_errors import SettingsRefused
from pitchsweep.configs.fingerprint import canonical_json
from pitchsweep.configs.frozen_job import freeze, thaw
from pitchsweep.configs.reader import find, read_job

SHIPPED = Path(find("demo:lot-ratio", "jobs")).parent.parent


def job_file(tmp_path: Path, what: str) -> Path:
    path = tmp_path / "job.yaml"
    path.write_text(
        f"job: j\nbench: {SHIPPED}/benches/bare-diode.yaml\n"
        f"recipe: {SHIPPED}/recipes/lot-spots.yaml\n{what}"
    )
    return path


def entry(part: str, more: str = "") -> str:
    return f"  - {{part: {SHIPPED}/parts/{part}.yaml{more}}}\n"


def test_the_parts_stand_in_their_order_and_the_first_open_one_is_it() -> None:
    job = read_job("demo:lot-ratio").job
    names = [(part.part, part.place) for part in job.lot]
    assert names == [
        ("reference-740", "centre"),
        ("shim-830", "centre"),
        ("shim-830-second", "near-the-edge"),
        ("reference-740", "centre"),
    ]
    assert job.part == job.lot[1]
    assert job.parts == (job.lot[1], job.lot[0], job.lot[2])
    assert thaw(freeze(job), "job.yaml") == job


def test_two_places_of_one_part_are_two_parts_of_a_lot(tmp_path: Path) -> None:
    lot = entry("shim-830", ", place: left") + entry("shim-830", ", place: right")
    job = read_job(job_file(tmp_path, f"lot:\n{lot}")).job
    assert [part.place for part in job.parts] == ["left", "right"]


@pytest.mark.parametrize(
    ("what", "words"),
    [
        ("", "a job names a 'part', or a 'lot' of parts, one of the two"),
        (
            f"part: {SHIPPED}/parts/shim-830.yaml\nlot:\n{entry('shim-830')}",
            "a job names a 'part', or a 'lot' of parts, one of the two",
        ),
        ("lot:\n" + entry("reference-740"), "has a certified pitch; one to be"),
        (f"lot:\n{entry('shim-830')}{entry('nowhere')}", "lot[1].part"),
        (
            "lot:\n" + entry("shim-830", ", plaice: left"),
            "nearest allowed key is place",
        ),
        (
            f"lot:\n{entry('shim-830')}schedule: {{enough_relative_u: 1e-5}}\n",
            "would end a lot before its last part",
        ),
    ],
)
def test_what_is_no_lot_is_refused(tmp_path: Path, what: str, words: str) -> None:
    with pytest.raises(SettingsRefused) as caught:
        read_job(job_file(tmp_path, what))
    assert words in str(caught.value)


def test_a_job_without_a_lot_is_what_it_was_before_there_were_lots() -> None:
    assert '"lot"' in canonical_json(read_job("demo:lot-ratio").job)
    alone = read_job("demo:shims").job
    assert "lot" not in alone.model_dump()
    assert "\nlot:" not in freeze(alone)
