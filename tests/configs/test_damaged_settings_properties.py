"""One damaged value at every key of every model is refused, naming file and key."""

from pathlib import Path
from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from port_builders import STILLS, port_values
from settings_damage import NEW_KEY, Field, damaged, damages, fields

from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.config_errors import SettingsRefused
from pitchsweep.configs.frozen_job import plain_yaml, thaw
from pitchsweep.configs.job_model import Job, JobFile
from pitchsweep.configs.part_model import Part
from pitchsweep.configs.reader import find, read_document, read_job, settings_from
from pitchsweep.configs.recipe_model import Recipe
from pitchsweep.configs.settings_base import Settings
from pitchsweep.configs.yaml_lines import parse_yaml

SENSOR = {"dialect": "air-line", "baud": 9600}
WITH_PORTS = port_values(
    stage={"port": "/dev/a", "dialect": "rotary-line", "identity": "stage 7"},
    air={"port": "/dev/c", **SENSOR},
    power={"port": "/dev/d", **SENSOR},
    camera={**STILLS, "gain": 1, "pixel_format": "Y16"},
)


def _whole(model: type[Settings]) -> dict[str, Any]:
    """Valid values of ``model`` with every optional block filled in."""
    schedule = {
        "not_before": "18:00Z",
        "stop_by": "06:00Z",
        "steady_K_per_h": 0.1,
        "enough_relative_u": 1e-5,
    }
    if model is JobFile:
        shipped = dict(read_document(find("demo:shims", "jobs")).value)
        return {**shipped, "schedule": schedule}
    job = read_job("demo:shims").job.model_dump()
    job["schedule"].update(schedule)
    job["bench"]["air_sensor"] = {"name": "invented", "calibration_due": "2030-01-15"}
    job["bench"]["power_sensor"] = {"name": "invented", "calibration_due": "2030-01-15"}
    job["part"]["certified"] = {
        "pitch_nm": 830.1,
        "u_pitch_nm": 0.1,
        "certificate": "invented 1",
    }
    job["bench"]["lasers"]["red"]["infrared_filter"] = {
        "description": "invented",
        "residual_mw": 0.001,
        "measured_on": "2026-01-15",
    }
    if model is Job:
        return job
    return dict(job[{Bench: "bench", Part: "part"}.get(model, "recipe")])


def _cases() -> list[Any]:
    models: list[type[Settings]] = [Bench, Part, Recipe, JobFile]
    cases = []
    for model in models:
        for field in fields(model):
            if "ports" not in field.path:
                cases.append(pytest.param(model, field, id=f"{model.__name__}-{field}"))
    return cases


def _refusal(model: type[Settings], values: dict[str, Any]) -> SettingsRefused:
    with pytest.raises(SettingsRefused) as caught:
        settings_from(parse_yaml(plain_yaml(values), "odd-name.yaml"), model)
    return caught.value


def _assert_clear(refused: SettingsRefused, key: str) -> None:
    message = str(refused)
    assert "odd-name.yaml line " in message
    assert key in message
    assert len(message.splitlines()) <= 5
    assert message.isprintable() or "\n" in message
    assert "Traceback" not in message
    assert refused.exit_code == 2


@pytest.mark.parametrize(("model", "field"), _cases())
@settings(max_examples=6, suppress_health_check=list(HealthCheck))
@given(data=st.data())
def test_one_damaged_value_is_refused(
    model: type[Settings], field: Field, data: st.DataObject
) -> None:
    value = data.draw(damages(field))
    refused = _refusal(model, damaged(_whole(model), field.path, value))
    key = str(field)
    if isinstance(value, dict) and NEW_KEY in value:
        key = f"{key}.{NEW_KEY}"
    _assert_clear(refused, key)


@pytest.mark.parametrize(
    "field", [f for f in fields(Bench) if "ports" in f.path], ids=str
)
@settings(max_examples=4, suppress_health_check=list(HealthCheck))
@given(data=st.data())
def test_one_damaged_value_of_a_bench_with_ports_is_refused(
    field: Field, data: st.DataObject
) -> None:
    values = {**_whole(Bench), "twin": None, "ports": WITH_PORTS}
    settings_from(parse_yaml(plain_yaml(values), "x"), Bench)
    value = data.draw(damages(field))
    _assert_clear(_refusal(Bench, damaged(values, field.path, value)), str(field))


@pytest.mark.parametrize("model", [Bench, Part, JobFile])
def test_an_unknown_key_at_the_top_is_refused(model: type[Settings]) -> None:
    _assert_clear(_refusal(model, {**_whole(model), NEW_KEY: 1}), NEW_KEY)


def test_a_damaged_frozen_job_is_refused() -> None:
    values = damaged(_whole(Job), ("bench", "screen", "distance_mm"), -3.0)
    with pytest.raises(SettingsRefused, match=r"job.yaml line \d+: bench.screen.dist"):
        thaw(plain_yaml(values), "job.yaml")


@settings(max_examples=150)
@given(data=st.one_of(st.binary(max_size=200), st.text(max_size=200)))
def test_any_bytes_give_a_document_or_a_refusal(data: bytes | str) -> None:
    try:
        document = parse_yaml(data, "any.yaml")
    except SettingsRefused as refused:
        assert "any.yaml" in str(refused)
    else:
        assert isinstance(document.value, dict)


YAML_PIECES = st.sampled_from(
    ["a", ": ", "\n", "  ", "- ", "[", "]", "{", "}", "&x ", "*x", "!!int ", "'", '"']
    + ["? ", "| ", "> ", "---\n", "...\n", "#", "%", "@", "\t", "1", ".nan", "<<", ","]
    + ["\\x", "\\ud800", "\x00", "\x85", "\ufeff", "é", "0x1", "1e999", "9" * 50]
)


@settings(max_examples=300)
@given(pieces=st.lists(YAML_PIECES, max_size=25))
def test_any_yaml_gives_a_bench_or_a_refusal(pieces: list[str]) -> None:
    with pytest.raises(SettingsRefused, match="any.yaml"):
        settings_from(parse_yaml("".join(pieces), "any.yaml"), Bench)


def test_a_folder_in_place_of_a_file_is_refused(tmp_path: Path) -> None:
    with pytest.raises(SettingsRefused, match="cannot be read"):
        read_job(tmp_path)
