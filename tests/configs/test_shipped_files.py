"""The shipped YAML: complete, readable from anywhere, marked as invented."""

import math
from pathlib import Path

import pytest

from pitchsweep.configs.reader import (
    find,
    read_bench,
    read_job,
    read_part,
    read_recipe,
    shipped_names,
)

JOBS = shipped_names("jobs")
TRACKS = [
    f"track-{p}-{c}" for p in (320, 740, 1600) for c in ("green", "red", "violet")
]


def test_the_promised_jobs_ship() -> None:
    assert {"shims", "shims-spots", "shims-four-mounts", *TRACKS} <= set(JOBS)


@pytest.mark.parametrize("name", JOBS)
def test_every_shipped_job_loads_from_another_folder(
    name: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    loaded = read_job(f"demo:{name}")
    assert loaded.job.job == name
    assert loaded.source == f"demo:{name}"
    seated = {f"lot[{index}]" for index in range(len(loaded.job.lot))}
    assert set(loaded.files) == {"job", "bench", "part", "recipe"} | seated
    assert all(path.is_file() for path in loaded.files.values())
    assert read_job(loaded.files["job"]).job == loaded.job


@pytest.mark.parametrize("name", JOBS)
def test_every_shipped_job_fits_the_travel_of_its_stage(name: str) -> None:
    job = read_job(f"demo:{name}").job
    stage, recipe = job.bench.stage, job.recipe
    lowest = min(recipe.mounts_deg) + recipe.start_deg - stage.approach_deg
    highest = max(recipe.mounts_deg) + recipe.stop_deg + stage.approach_deg
    assert stage.travel_min_deg <= lowest and highest <= stage.travel_max_deg


def test_every_bench_part_and_recipe_reads_and_is_named_after_its_file() -> None:
    assert all(read_bench(f"demo:{n}").bench == n for n in shipped_names("benches"))
    assert all(read_part(f"demo:{n}").part == n for n in shipped_names("parts"))
    assert all(read_recipe(f"demo:{n}").recipe == n for n in shipped_names("recipes"))


@pytest.mark.parametrize("kind", ["benches", "parts", "recipes", "jobs"])
def test_every_shipped_file_says_that_it_is_invented(kind: str) -> None:
    for name in shipped_names(kind):
        text = find(f"demo:{name}", kind).read_text(encoding="utf-8")
        assert text.startswith("# Invented for demonstration")
        assert 'note: "invented: ' in text


def test_the_demo_camera_stays_small_and_sees_the_screen_about_its_middle() -> None:
    for name in shipped_names("benches"):
        camera = read_bench(f"demo:{name}").camera
        assert camera.width_px * camera.height_px <= 1_300_000
        assert camera.centre_column_px == (camera.width_px - 1) / 2
        assert camera.centre_row_px == (camera.height_px - 1) / 2


def test_the_red_laser_is_the_published_line() -> None:
    """CIPM Recommendation 2 (96th meeting, 2007): 473.6127 THz, u_rel 1.5e-6."""
    laser = read_bench("demo:red-laser").lasers["red"]
    assert laser.vacuum_wavelength_nm == pytest.approx(
        299_792.458 / 473.6127, abs=0.00007
    )
    assert laser.u_wavelength_nm / laser.vacuum_wavelength_nm == pytest.approx(
        1.5e-6, rel=0.01
    )


def test_only_one_track_job_sends_no_order_out_in_its_sweep() -> None:
    """In reflection sin b = sin a - lambda/d leaves only where it is above -1."""
    silent = []
    for name in TRACKS:
        job = read_job(f"demo:{name}").job
        (laser,) = job.recipe.lasers
        ratio = job.bench.lasers[laser].vacuum_wavelength_nm / job.part.nominal_pitch_nm
        if ratio - 1.0 >= math.sin(math.radians(job.recipe.stop_deg)):
            silent.append(name)
    assert silent == ["track-320-red"]
