"""Fingerprints do not move with the writing; frozen jobs come back to the last bit."""

import hashlib
import re
from pathlib import Path
from typing import Any

import pytest
import yaml
from hypothesis import given, settings
from hypothesis import strategies as st

from pitchsweep.configs.fingerprint import canonical_json, fingerprint
from pitchsweep.configs.frozen_job import freeze, plain_yaml, thaw
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.part_model import Tolerance
from pitchsweep.configs.reader import find, read_job, read_part, shipped_names

# Printed by coreutils' sha256sum, given the canonical text typed out by hand.
PINNED_TEXT = '{"kind":"Tolerance","settings":{"lower_nm":825.0,"upper_nm":835.5}}'


def _reordered(value: Any) -> Any:
    if isinstance(value, dict):
        return {k: _reordered(value[k]) for k in reversed(value)}
    return value


def _as_lists(value: Any) -> Any:
    if isinstance(value, dict):
        return {k: _as_lists(v) for k, v in value.items()}
    return [_as_lists(v) for v in value] if isinstance(value, tuple) else value


def test_fingerprint_ignores_order_comments_layout_and_defaults(tmp_path: Path) -> None:
    path = find("demo:shim-830", "parts")
    part = read_part(path)
    text = plain_yaml(_reordered(part.model_dump()))
    text = "# other words\n\n" + re.sub(r"(?m)\.0$", "", text)
    assert "nominal_pitch_nm: 830\n" in text
    other = tmp_path / "other.yaml"
    other.write_text(text.replace("u_tilt_mrad: 10\n", ""), encoding="utf-8")
    assert fingerprint(read_part(other)) == fingerprint(part)


def test_fingerprint_is_the_same_on_every_day() -> None:
    """Pinned on a block whose keys are settled: a new key rightly moves the others."""
    limits = Tolerance.model_validate({"lower_nm": 825.0, "upper_nm": 835.5})
    text = canonical_json(limits)
    assert text == PINNED_TEXT
    assert fingerprint(limits) == hashlib.sha256(text.encode()).hexdigest()


def test_fingerprint_moves_with_every_shipped_job() -> None:
    prints = {fingerprint(read_job(f"demo:{n}").job) for n in shipped_names("jobs")}
    assert len(prints) == len(shipped_names("jobs"))


def test_fingerprint_sees_the_last_bit_of_a_float_but_not_the_sign_of_zero() -> None:
    part = read_part("demo:shim-830")
    moved = part.model_copy(update={"nominal_pitch_nm": 830.0000000000001})
    assert fingerprint(moved) != fingerprint(part)
    bench = read_job("demo:shims").job.bench
    hole = bench.screen.hole
    minus = hole.model_copy(update={"x_mm": -0.0})
    assert fingerprint(minus) == fingerprint(hole)


@pytest.mark.parametrize("name", shipped_names("jobs"))
def test_a_frozen_job_comes_back_equal(name: str) -> None:
    job = read_job(f"demo:{name}").job
    assert thaw(freeze(job), "job.yaml") == job
    assert freeze(thaw(freeze(job), "job.yaml")) == freeze(job)


def test_a_frozen_job_is_read_by_path_like_a_job(tmp_path: Path) -> None:
    job = read_job("demo:shims").job
    path = tmp_path / "job.yaml"
    path.write_text(freeze(job), encoding="utf-8")
    loaded = read_job(path)
    assert loaded.job == job
    assert set(loaded.files.values()) == {path}


@settings(max_examples=40)
@given(
    note=st.text(min_size=1, max_size=60).filter(lambda t: t.isprintable())
    | st.sampled_from(
        ["no", "null", "1e-5", "2024-01-01", "1:30", "'", '"', " x ", "#"]
    )
    | st.text(st.characters(codec="utf-8"), min_size=1, max_size=20),
    pressure=st.floats(600.0, 1200.0),
    expansion=st.floats(-1e-5, 5e-4),
    exposures=st.lists(
        st.floats(0.0, 60000.0, exclude_min=True), min_size=1, max_size=6, unique=True
    ),
)
def test_freezing_keeps_every_bit(
    note: str, pressure: float, expansion: float, exposures: list[float]
) -> None:
    values = read_job("demo:shims").job.model_dump()
    values["note"] = values["part"]["serial"] = note
    values["bench"]["air"]["pressure_hPa"] = pressure
    values["part"]["material"]["expansion_per_K"] = expansion
    values["recipe"]["exposures_ms"] = tuple(exposures)
    job = Job.model_validate(values)
    text = freeze(job)
    back = thaw(text, "job.yaml")
    assert back == job
    assert canonical_json(back) == canonical_json(job)
    # PyYAML's own safe reader, which knows nothing of ours, reads the same.
    assert yaml.safe_load(text) == _as_lists(job.model_dump())
