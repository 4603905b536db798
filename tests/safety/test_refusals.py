"""What is refused outright, and that a sweep is refused before its bench opens."""

import sys
from pathlib import Path

import pytest
from beam_map_builders import ALL_ROUND, job_within, with_laser
from builders import demo_job
from pydantic import ValidationError

from pitchsweep.acquire.progress import LineProgress
from pitchsweep.acquire.sweep_session import sweep_job
from pitchsweep.configs.enclosure_model import Enclosure, Surface
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.reader import shipped_names
from pitchsweep.safety.refusals import refuse_outright
from pitchsweep.safety.run_refusals import refuse_unsafe, why_refused
from pitchsweep.safety.safety_errors import GateRefused


def said(job: Job) -> str:
    """What the only refusal says."""
    (refusal,) = refuse_outright(job)
    assert refusal.remedy
    return refusal.what


@pytest.mark.parametrize("name", shipped_names("jobs"))
def test_no_shipped_job_is_refused(name: str) -> None:
    assert why_refused(demo_job(name)) == ()
    refuse_unsafe(demo_job(name))


def test_class_4_is_refused_whatever_encloses_it() -> None:
    job = with_laser(
        job_within([ALL_ROUND], power_ceiling_mw=1e4), "red", full_drive_mw=501.0
    )
    assert "class 4" in said(job)


def test_class_3b_needs_an_enclosure_declared_class_1() -> None:
    enclosed = with_laser(job_within([ALL_ROUND]), "red", full_drive_mw=20.0)
    assert refuse_outright(enclosed) == ()
    open_bench = job_within([ALL_ROUND], declared_class="none")
    assert "class 3B" in said(with_laser(open_bench, "red", full_drive_mw=20.0))
    bare = demo_job("shims-spots", bench={"enclosure": None})
    assert "class 3B" in said(with_laser(bare, "red", full_drive_mw=20.0))
    assert refuse_outright(with_laser(bare, "red", full_drive_mw=4.9)) == ()


def test_no_laser_passes_the_ceiling_of_the_bench() -> None:
    job = job_within([ALL_ROUND], power_ceiling_mw=1.0)
    assert refuse_outright(job) == ()
    assert "ceiling of 1 mW" in said(with_laser(job, "red", full_drive_mw=1.01))


@pytest.mark.parametrize(
    ("wavelength_nm", "u_nm", "refused"),
    [(400.5, 1.0, True), (401.0, 1.0, False), (699.0, 1.5, True), (698.0, 1.5, False)],
)
def test_wavelengths_near_the_ends_of_the_limits(
    wavelength_nm: float, u_nm: float, refused: bool
) -> None:
    job = with_laser(
        demo_job("shims-spots"),
        "red",
        vacuum_wavelength_nm=wavelength_nm,
        u_wavelength_nm=u_nm,
    )
    found = refuse_outright(job)
    assert bool(found) is refused
    if refused:
        assert "400 to 700 nm" in found[0].what
        assert why_refused(job) == found


def test_a_doubled_laser_needs_its_infrared_filter() -> None:
    job = demo_job("track-740-green")
    assert "infrared filter" in said(with_laser(job, "green", infrared_filter=None))


def test_only_the_recipe_s_lasers_are_judged() -> None:
    job = with_laser(demo_job("track-740-red"), "green", infrared_filter=None)
    assert refuse_outright(job) == ()


def test_a_refused_sweep_opens_nothing_and_leaves_no_folder(tmp_path: Path) -> None:
    def open_bench(request: object) -> object:
        raise AssertionError("the bench was opened")

    job = demo_job("shims-spots", bench={"enclosure": None})
    with pytest.raises(GateRefused, match="declares no enclosure") as caught:
        sweep_job(job, tmp_path, LineProgress(sys.stderr), open_bench)  # type: ignore[arg-type]
    assert caught.value.exit_code == 3
    assert len(str(caught.value).splitlines()) == 2
    assert not list(tmp_path.iterdir())


@pytest.mark.parametrize(
    ("keys", "words"),
    [
        ({"azimuth_to_deg": -181.0}, "azimuth_to_deg"),
        ({"azimuth_to_deg": 200.0}, "azimuth_to_deg"),
        ({"elevation_to_deg": -90.0}, "elevation_from_deg"),
        ({"what": "window"}, "optical_density"),
        ({"what": "window", "acts_as": "mirror", "optical_density": 3.0}, "mirror"),
        ({"optical_density": 3.0}, "belongs to a window"),
        (
            {
                "throws_into": {
                    k: v for k, v in ALL_ROUND.model_dump().items() if "_deg" in k
                }
            },
            "belongs to a mirror",
        ),
    ],
)
def test_surfaces_that_make_no_sense_are_refused(
    keys: dict[str, object], words: str
) -> None:
    with pytest.raises(ValidationError, match=words):
        Surface(**{**ALL_ROUND.model_dump(), **keys})


def test_two_surfaces_of_one_name_are_refused() -> None:
    job = job_within([ALL_ROUND])
    assert job.bench.enclosure is not None
    twice = {**job.bench.enclosure.model_dump(), "surfaces": (ALL_ROUND, ALL_ROUND)}
    with pytest.raises(ValidationError, match="names of the surfaces"):
        Enclosure(**twice)
