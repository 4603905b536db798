"""What is asked of ``fit`` beyond a plain fit of a run, and kept by ``report``."""

import json
from pathlib import Path

import pytest
from acquire_fakes import FakeBench, opener, small_job

from pitchsweep.acquire import bench_session
from pitchsweep.acquire.cli import run
from pitchsweep.acquire.fit_sources import FitOptions, options_of_run
from pitchsweep.configs.frozen_job import freeze


def result_in(folder: Path, **keys: object) -> Path:
    folder.joinpath("result.json").write_text(json.dumps(keys), encoding="utf-8")
    return folder


def test_a_report_asks_for_what_the_fit_before_it_was_asked(tmp_path: Path) -> None:
    asked = ["unknown-pitch", "monte-carlo"]
    found = options_of_run(result_in(tmp_path, asked=asked, coverage=0.99))
    assert found.unknown_pitch and found.monte_carlo
    assert found.coverage == 0.99


@pytest.mark.parametrize(
    "keys",
    [{}, {"asked": [], "coverage": "x"}, {"asked": 3, "coverage": 0.95}],
)
def test_a_result_of_another_kind_asks_for_nothing(
    tmp_path: Path, keys: dict[str, object]
) -> None:
    assert options_of_run(result_in(tmp_path, **keys)) == FitOptions()


def test_a_run_without_a_result_asks_for_nothing(tmp_path: Path) -> None:
    assert options_of_run(tmp_path) == FitOptions()
    (tmp_path / "result.json").write_bytes(b"\xff{")
    assert options_of_run(tmp_path) == FitOptions()


def test_a_run_keeps_its_options_and_is_not_fitted_with_an_edited_job(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    job = small_job(step_deg=2.0, start_deg=-30.0, stop_deg=30.0)
    monkeypatch.setattr(bench_session, "open_twin_bench", opener(FakeBench(job)))
    (tmp_path / "job.yaml").write_text(freeze(job), encoding="utf-8")
    runs = str(tmp_path / "runs")
    assert run(["sweep", str(tmp_path / "job.yaml"), "--runs", runs, "--json"]) == 0
    first = json.loads(capsys.readouterr().out)
    assert first["part"] == job.part.part and first["serial"] == job.part.serial
    assert first["simulated"] is True and first["asked"] == []
    (folder,) = (tmp_path / "runs").iterdir()
    assert run(["fit", str(folder), "--coverage", "0.99", "--json"]) == 0
    wider = json.loads(capsys.readouterr().out)
    assert (first["coverage"], wider["coverage"]) == (0.95, 0.99)
    assert wider["k"] > 1.25 * first["k"]
    assert run(["report", str(folder), "--json"]) == 0
    assert json.loads(capsys.readouterr().out) == wider
    frozen = folder / "job.yaml"
    whole = frozen.read_text(encoding="utf-8")
    frozen.write_text(whole.replace("lower_nm: 825", "lower_nm: 820"), encoding="utf-8")
    assert frozen.read_text(encoding="utf-8") != whole
    assert run(["fit", str(folder)]) == 2
    assert "not the job with which this run began" in capsys.readouterr().err
