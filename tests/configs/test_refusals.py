"""What a refusal says: file, line, key, value, what is allowed."""

import shlex
from collections.abc import Callable
from pathlib import Path

import pytest

from pitchsweep.configs.allowed_values import allowed_text
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.config_errors import SettingsRefused
from pitchsweep.configs.job_model import JobFile
from pitchsweep.configs.reader import (
    find,
    read_bench,
    read_job,
    read_part,
    read_recipe,
)
from pitchsweep.configs.recipe_model import Recipe
from pitchsweep.configs.typed_command import typed


def _bench_text() -> str:
    return find("demo:red-laser", "benches").read_text(encoding="utf-8")


def _refused_bench(tmp_path: Path, old: str, new: str) -> tuple[str, int]:
    """The message for the shipped bench with ``old`` replaced, and that line."""
    text = _bench_text()
    assert text.count(old) == 1
    path = tmp_path / "bench.yaml"
    path.write_text(text.replace(old, new), encoding="utf-8")
    with pytest.raises(SettingsRefused) as caught:
        read_bench(path)
    return str(caught.value), text[: text.index(old)].count("\n") + 1


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        (
            "distance_mm: 250.0",
            "distance_mm: -3.0",
            "screen.distance_mm = -3.0: allowed 5 to 5000",
        ),
        (
            "width_mm: 400.0",
            "width_mm: .nan",
            "screen.width_mm = .nan: allowed 2 to 5000",
        ),
        (
            "u_tilt_mrad: 30.0",
            "u_tilt_deg: 30.0",
            "screen.u_tilt_deg = 30.0: no such key; the nearest allowed key is "
            "u_tilt_mrad",
        ),
        ("bits: 12", "bits: 13", "camera.bits = 13: allowed 8 or 10 or 12 or 16"),
        (
            "direction: 1",
            "direction: yes",
            "stage.direction = yes: allowed 1 or -1",
        ),
        ("direction: 1", "direction: true", "stage.direction = true: allowed 1 or -1"),
        (
            "width_px: 1280",
            "width_px: 1280.5",
            "camera.width_px = 1280.5: allowed a whole number 64 to 20000",
        ),
        (
            "speckle_contrast: 1.0",
            "speckle_contrast: high",
            "twin.effects.speckle_contrast = high: allowed 0 to 1",
        ),
        (
            "line: keep-alive",
            "line: rts",
            "emission.line: 'rts' may not hold light: a static level stays up when a"
            " program hangs, and RTS and DTR rise when a port is merely opened;"
            " allowed keep-alive or pulses",
        ),
        (
            "travel_min_deg: -180.0",
            "travel_min_deg: 360.0",
            "travel_min_deg must be below travel_max_deg",
        ),
    ],
)
def test_one_wrong_value_is_named(
    tmp_path: Path, old: str, new: str, words: str
) -> None:
    message, line = _refused_bench(tmp_path, old, new)
    shown_line = "stage" if "must be below" in words else str(line)
    if shown_line != "stage":
        assert message == f"{tmp_path}/bench.yaml line {line}: {words}"
    assert words in message and len(message.splitlines()) == 1


def test_a_missing_key_is_named_with_the_line_of_its_block(tmp_path: Path) -> None:
    message, line = _refused_bench(tmp_path, "  distance_mm: 250.0\n", "")
    block = line - 1
    assert message == (
        f"{tmp_path}/bench.yaml line {block}: screen.distance_mm: is missing; "
        "allowed 5 to 5000"
    )


def test_a_bench_with_twin_and_ports_is_refused(tmp_path: Path) -> None:
    stage = "{port: /dev/x, dialect: rotary-line}"
    unit = "{port: /dev/y, dialect: emission-line}"
    camera = "{by: usb-video, address: /dev/video0}"
    ports = f"ports:\n  stage: {stage}\n  unit: {unit}\n  camera: {camera}\ntwin:"
    message, _ = _refused_bench(tmp_path, "twin:", ports)
    assert "either 'twin:' or 'ports:', exactly one" in message


def test_text_that_looks_like_a_number_asks_for_quotes(tmp_path: Path) -> None:
    text = find("demo:shim-830", "parts").read_text(encoding="utf-8")
    path = tmp_path / "part.yaml"
    path.write_text(text.replace('serial: "7"', "serial: 7"), encoding="utf-8")
    with pytest.raises(SettingsRefused, match="serial = 7: .*in quotes"):
        read_part(path)


def test_many_problems_take_five_lines(tmp_path: Path) -> None:
    path = tmp_path / "recipe.yaml"
    path.write_text("".join(f"k{i}: 1\n" for i in range(9)), encoding="utf-8")
    with pytest.raises(SettingsRefused) as caught:
        read_recipe(path)
    lines = str(caught.value).splitlines()
    assert len(lines) == 5
    assert lines[-1] == "and 11 more problems"


def test_control_characters_never_reach_the_terminal(tmp_path: Path) -> None:
    path = tmp_path / "recipe.yaml"
    path.write_text('recipe: "\\e[31m\\ud800\\n"\n', encoding="utf-8")
    with pytest.raises(SettingsRefused) as caught:
        read_recipe(path)
    assert all(line.isprintable() for line in str(caught.value).splitlines())
    str(caught.value).encode("utf-8")


def test_whole_numbers_serve_where_decimals_are_asked(tmp_path: Path) -> None:
    path = tmp_path / "bench.yaml"
    text = _bench_text().replace("distance_mm: 250.0\n", "distance_mm: 250\n", 1)
    path.write_text(text, encoding="utf-8")
    assert read_bench(path).screen.distance_mm == 250.0


def test_a_file_that_is_not_there_is_named(tmp_path: Path) -> None:
    with pytest.raises(SettingsRefused, match="nowhere.yaml: cannot be read .No such"):
        read_job(tmp_path / "nowhere.yaml")


def test_names_in_a_job_are_relative_to_the_job(tmp_path: Path) -> None:
    path = tmp_path / "job.yaml"
    path.write_text("job: j\nbench: b.yaml\npart: p.yaml\nrecipe: r.yaml\n")
    with pytest.raises(SettingsRefused) as caught:
        read_job(path)
    assert str(caught.value) == (
        f"{path} line 2: bench = b.yaml: no such file ({tmp_path}/b.yaml); "
        "names are relative to the job file"
    )


def test_a_laser_that_the_bench_lacks_is_refused(tmp_path: Path) -> None:
    for name, kind in [("red-laser", "benches"), ("shim-830", "parts")]:
        source = find(f"demo:{name}", kind)
        (tmp_path / source.name).write_bytes(source.read_bytes())
    recipe = find("demo:wide-violet", "recipes")
    (tmp_path / "r.yaml").write_bytes(recipe.read_bytes())
    path = tmp_path / "job.yaml"
    path.write_text(
        "job: j\nbench: red-laser.yaml\npart: shim-830.yaml\nrecipe: r.yaml\n"
    )
    with pytest.raises(SettingsRefused, match="laser 'violet'; the bench has red"):
        read_job(path)


def test_an_unknown_demo_lists_the_names() -> None:
    with pytest.raises(SettingsRefused, match="demo:shim: .* shims, shims-four-mounts"):
        read_job("demo:shim")
    with pytest.raises(SettingsRefused):
        read_job("demo:../benches/red-laser")


def test_allowed_text_comes_from_the_schema() -> None:
    cases = {
        ("screen", "u_map_mm"): "above 0 up to 20",
        ("lasers", "any", "frequency_doubled"): "true or false",
        ("stage", "u_harmonics_arcsec"): "a list of 4, each above 0 up to 1e+09",
        ("lasers",): "a block of 1 to 8 names",
        ("note",): "text of 1 to 400 characters",
        ("nowhere",): "",
    }
    assert {path: allowed_text(Bench, path) for path in cases} == cases
    assert allowed_text(Recipe, ("exposures_ms",)).startswith("a list of 1 to 6, each")
    assert allowed_text(JobFile, ("job",)).startswith("a name of letters")


@pytest.mark.parametrize(
    ("given", "reader", "wanted"),
    [
        (("demo:red-laser", "benches"), read_job, "job"),
        (("demo:shim-830", "parts"), read_bench, "bench"),
        (("demo:shims", "jobs"), read_part, "part"),
        (("demo:one-mount-spots", "recipes"), read_job, "job"),
    ],
)
def test_a_file_of_another_kind_is_called_by_its_name(
    given: tuple[str, str], reader: Callable[[Path], object], wanted: str
) -> None:
    with pytest.raises(SettingsRefused) as refused:
        reader(find(*given))
    kind = {"benches": "bench"}.get(given[1], given[1].removesuffix("s"))
    assert f"this is a {kind} file; a {wanted} file is asked for" in str(refused.value)
    assert "\n" not in str(refused.value)


def test_a_command_to_copy_survives_a_space(tmp_path: Path) -> None:
    run = tmp_path / "night of 3 May" / "it's one"
    assert shlex.split(typed("ack", run)) == ["pitchsweep", "ack", str(run)]


@pytest.mark.parametrize(
    ("change", "said"),
    [
        ("read_side: bare\n", "must say its 'read_side'"),
        ("track_radius_mm: 40.0\n", "needs 'track_radius_mm'"),
    ],
)
def test_a_disc_that_does_not_say_how_it_is_read_is_refused(
    tmp_path: Path, change: str, said: str
) -> None:
    text = find("demo:track-740", "parts").read_text(encoding="utf-8")
    assert change in text
    path = tmp_path / "disc.yaml"
    path.write_text(text.replace(change, ""), encoding="utf-8")
    with pytest.raises(SettingsRefused) as caught:
        read_part(str(path))
    assert said in str(caught.value)
    assert f"{path} line " in str(caught.value)


def test_a_cover_without_a_thickness_is_refused(tmp_path: Path) -> None:
    text = find("demo:track-740", "parts").read_text(encoding="utf-8")
    path = tmp_path / "disc.yaml"
    path.write_text(text.replace("side: bare", "side: through-cover"), encoding="utf-8")
    with pytest.raises(SettingsRefused, match="needs cover_mm above 0"):
        read_part(str(path))


@pytest.mark.parametrize("day", ["2026-02-31", "2026-13-01"])
def test_a_day_that_no_calendar_has_is_refused(tmp_path: Path, day: str) -> None:
    said, line = _refused_bench(
        tmp_path, "u_wavelength_nm:", f'wavelength_due: "{day}"\n    u_wavelength_nm:'
    )
    assert f"line {line}" in said and f"{day} is no day of the calendar" in said
