"""``fit --unknown-pitch``, and a nominal pitch that is far off, from the terminal."""

import json
from dataclasses import replace
from pathlib import Path

import pytest
from builders import TwinSweep, demo_job, twin_sweep

from pitchsweep.acquire.cli import run
from pitchsweep.analysis.order_table_file import write_order_table

OPTIONS = ["--bench", "demo:three-lasers", "--part", "demo:track-740"]


def sweep_in_a_file(folder: Path, *, bright: bool = False) -> tuple[TwinSweep, Path]:
    """A table without orders, the nominal pitch off by up to 20 %."""
    job = demo_job(
        "track-740-red",
        twin={"pitch_off_percent": 20.0},
        recipe={"start_deg": -75.0, "stop_deg": 75.0, "step_deg": 3.0},
    )
    sweep = twin_sweep(job, 3)
    path = folder / "spots.csv"
    table = sweep.table if bright else replace(sweep.table, brightness=None)
    path.write_text(write_order_table(table))
    return sweep, path


def test_a_nominal_pitch_far_off_is_corrected_and_said(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    sweep, path = sweep_in_a_file(tmp_path)
    assert abs(sweep.truth.pitch_nm / 740.0 - 1.0) > 0.05
    assert run(["fit", str(path), *OPTIONS, "--json"]) == 0
    result = json.loads(capsys.readouterr().out)
    off = abs(result["pitch_nm"] - sweep.truth.pitch_nm)
    assert off < 4.0 * result["u_pitch_nm"]
    assert any("is it this part" in text for text in result["warnings"])


def test_a_table_without_brightness_cannot_tell_half_from_whole(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    _, path = sweep_in_a_file(tmp_path)
    assert run(["fit", str(path), *OPTIONS, "--unknown-pitch"]) == 6
    said = capsys.readouterr().err
    assert "or 2 times that" in said and "within 20 %" in said
    assert "Traceback" not in said


def test_a_table_with_brightness_tells_half_from_whole(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    sweep, path = sweep_in_a_file(tmp_path, bright=True)
    assert run(["fit", str(path), *OPTIONS, "--unknown-pitch", "--json"]) == 0
    result = json.loads(capsys.readouterr().out)
    off = abs(result["pitch_nm"] - sweep.truth.pitch_nm)
    assert off < 4.0 * result["u_pitch_nm"]
    assert any("fainter than their neighbours" in text for text in result["warnings"])
