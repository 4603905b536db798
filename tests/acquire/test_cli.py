"""The command line from outside: exit codes, two plain lines, JSON alone on stdout."""

import errno
import json
import os
import subprocess
import sys
from collections.abc import Callable
from importlib.metadata import version
from pathlib import Path

import cv2
import pytest
from acquire_fakes import FakeBench, Killed, QuietProgress, opener, small_job
from port_builders import with_ports

from pitchsweep.acquire import bench_session, exit_codes
from pitchsweep.acquire.acquire_errors import SweepStopped
from pitchsweep.acquire.cli import run
from pitchsweep.acquire.sweep_session import sweep_job
from pitchsweep.configs.frozen_job import freeze
from pitchsweep.configs.job_model import Job
from pitchsweep.drivers.driver_errors import NoAnswerInTime

JOB = small_job(step_deg=2.0, start_deg=-30.0, stop_deg=30.0)


@pytest.fixture
def fake(monkeypatch: pytest.MonkeyPatch) -> FakeBench:
    """The command line's bench replaced by one of values."""
    bench = FakeBench(JOB)
    monkeypatch.setattr(bench_session, "open_twin_bench", opener(bench))
    return bench


DERIVED = ("orders.csv", "result.json", "report.html", "report.pdf", "result.png")


def job_file(folder: Path, job: Job = JOB) -> str:
    path = folder / "job.yaml"
    path.write_text(freeze(job), encoding="utf-8")
    return str(path)


def refused(capsys: pytest.CaptureFixture[str], code: int, *words: str) -> str:
    """Checks that stderr holds one or two plain lines with ``words``."""
    shown = capsys.readouterr()
    error = shown.err[shown.err.index("pitchsweep: ") :]
    assert "Traceback" not in shown.err and shown.out == ""
    assert 1 <= error.count("\n") <= 2, error
    for word in words:
        assert word in error
    return error


def test_sweep_prints_a_summary_and_leaves_a_report(
    tmp_path: Path, fake: FakeBench, capsys: pytest.CaptureFixture[str]
) -> None:
    assert run(["sweep", job_file(tmp_path), "--runs", str(tmp_path / "runs")]) == 0
    shown = capsys.readouterr()
    for word in ("Pitch", "k = ", "Decision", "report.html", "no safety function"):
        assert word in shown.out
    (folder,) = (tmp_path / "runs").iterdir()
    for name in (*DERIVED, "run.db"):
        assert (folder / name).stat().st_size > 0


def test_json_alone_on_stdout_and_fit_gives_the_same_numbers(
    tmp_path: Path, fake: FakeBench, capsys: pytest.CaptureFixture[str]
) -> None:
    job = job_file(tmp_path)
    assert run(["sweep", job, "--runs", str(tmp_path / "runs"), "--json"]) == 0
    first = json.loads(capsys.readouterr().out)
    (folder,) = (tmp_path / "runs").iterdir()
    written = {p.name: p.read_bytes() for p in folder.iterdir() if p.is_file()}
    for verb in ("fit", "report"):
        for name in DERIVED:
            (folder / name).unlink()
        assert run([verb, str(folder), "--json"]) == 0
        assert json.loads(capsys.readouterr().out) == first
        again = {p.name: p.read_bytes() for p in folder.iterdir() if p.is_file()}
        assert again == written


def test_orders_of_a_run_fit_again_as_a_table(
    tmp_path: Path, fake: FakeBench, capsys: pytest.CaptureFixture[str]
) -> None:
    job = job_file(tmp_path)
    assert run(["sweep", job, "--runs", str(tmp_path / "runs"), "--json"]) == 0
    first = json.loads(capsys.readouterr().out)
    (folder,) = (tmp_path / "runs").iterdir()
    table = tmp_path / "table.csv"
    table.write_bytes((folder / "orders.csv").read_bytes())
    demo = ["--bench", "demo:red-laser", "--part", "demo:shim-830"]
    assert run(["fit", str(table), *demo, "--json"]) == 0
    second = json.loads(capsys.readouterr().out)
    assert second["pitch_nm"] == pytest.approx(first["pitch_nm"], rel=1e-6)
    assert {p.name for p in tmp_path.iterdir()} == {"job.yaml", "runs", "table.csv"}
    assert run(["fit", str(table), str(table), *demo]) == 2
    assert "same spots" in capsys.readouterr().err
    out = tmp_path / "out"
    other = tmp_path / "other.csv"
    head, *rows = table.read_text().splitlines()
    other.write_text("\n".join([head, *rows[::2]]) + "\n")
    assert run(["fit", str(table), str(other), *demo, "--out", str(out)]) == 0
    assert (out / "report.html").exists() and (out / "report.pdf").exists()


def frame_set(folder: Path) -> None:
    """Frames of the bench of values, as if taken elsewhere."""
    fake = FakeBench(small_job(record="frames", step_deg=3.0, exposures_ms=(5.0,)))
    path = sweep_job(fake.job, folder / "runs", QuietProgress(), opener(fake)).path
    rows = ["file,step,stage_deg,mount_deg,laser,exposure_ms"]
    for number, step in enumerate(range(-20, 21, 3)):
        (folder / "set").mkdir(exist_ok=True)
        fake.angle_deg, fake.lit = float(step), True
        from pitchsweep.drivers.devices import Label

        image = fake.expose(5.0, Label(0, "red", 0, number, 0))
        cv2.imwrite(str(folder / "set" / f"{number}.tif"), image)
        rows.append(f"{number}.tif,{number},{step},0,red,5")
    (folder / "set" / "frames.csv").write_text("\n".join(rows) + "\n")
    (folder / "bench.yaml").write_text(bench_text(fake.job, path))


def bench_text(job: Job, run_path: Path) -> str:
    import yaml

    frozen = yaml.safe_load((run_path / "job.yaml").read_text())
    return yaml.safe_dump(frozen["bench"])


def test_a_frame_set_is_searched_and_fitted(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    frame_set(tmp_path)
    arguments = ["fit", str(tmp_path / "set"), "--bench", str(tmp_path / "bench.yaml")]
    assert run([*arguments, "--part", "demo:shim-830", "--json"]) == 0
    result = json.loads(capsys.readouterr().out)
    # The bench of values has a pitch of 1.004 times nominal.
    assert abs(result["pitch_nm"] - 1.004 * 830.0) < 4.0 * result["u_pitch_nm"]
    assert run(arguments) == 2
    refused(capsys, 2, "--part is missing")


@pytest.mark.parametrize(
    ("row", "word"),
    [
        ("0.tif,0,x,0,red,5", "column stage_deg"),
        ("0.tif,0,1,0,blue,5", "column laser"),
        ("0.tif,0.5,1,0,red,5", "column step"),
        ("0.tif,0,1,0,red,-1", "column exposure_ms"),
        ("no.tif,0,1,0,red,5", "column file"),
    ],
)
def test_a_bad_row_of_a_frame_set_is_named(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], row: str, word: str
) -> None:
    head = "file,step,stage_deg,mount_deg,laser,exposure_ms"
    (tmp_path / "frames.csv").write_text(f"# note\n{head}\n{row}\n")
    demo = ["--bench", "demo:red-laser", "--part", "demo:shim-830"]
    assert run(["fit", str(tmp_path), *demo]) == 2
    refused(capsys, 2, "frames.csv", "line 3", word)


@pytest.mark.parametrize(
    ("arguments", "word"),
    [
        (["sweep"], "--resume"),
        (["sweep", "demo:shims", "--twin-seed", "-1"], "--twin-seed"),
        (["swep"], "swep"),
        (["sweep", "demo:nothing"], "demo:nothing"),
        (["sweep", "nothing.yaml"], "nothing.yaml"),
        (["sweep", "demo:track-320-red"], "79.9"),
        (["sweep", "--resume", "nothing"], "no such run folder"),
        (["report", "nothing"], "no such run folder"),
        (["fit", "nothing.csv"], "nothing.csv"),
        (["fit", __file__], "--bench"),
        (["fit", "."], "frames.csv"),
        (["fit"], "inputs"),
        (
            ["fit", "no.csv", "--bench", "demo:red-laser", "--part", "demo:shim-830"],
            "no.csv",
        ),
    ],
)
def test_refused_input_exits_2_in_two_lines(
    arguments: list[str],
    word: str,
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
) -> None:
    monkeypatch.chdir(tmp_path)
    assert run(arguments) == 2
    refused(capsys, 2, word)
    assert not list(tmp_path.iterdir())


def test_a_bench_with_ports_exits_3(
    tmp_path: Path, fake: FakeBench, capsys: pytest.CaptureFixture[str]
) -> None:
    job = job_file(tmp_path, with_ports(JOB))
    assert run(["sweep", job, "--runs", str(tmp_path / "runs")]) == 3
    refused(capsys, 3, "ports")
    assert run(["sweep", job, "--twin-seed", "1"]) == 2
    assert not (tmp_path / "runs").exists()


def test_a_trip_exits_3(
    tmp_path: Path, fake: FakeBench, capsys: pytest.CaptureFixture[str]
) -> None:
    fake.shift_mm = -60.0
    assert run(["sweep", job_file(tmp_path), "--runs", str(tmp_path / "runs")]) == 3
    refused(capsys, 3, "not where predicted")


def test_a_device_fault_exits_4(
    tmp_path: Path, fake: FakeBench, capsys: pytest.CaptureFixture[str]
) -> None:
    def silent(what: str) -> None:
        if what == "move":
            raise NoAnswerInTime("stage", "where", 2.0)

    fake.on_call = silent
    assert run(["sweep", job_file(tmp_path), "--runs", str(tmp_path / "runs")]) == 4
    refused(capsys, 4, "stage did not answer")


def test_a_stopped_sweep_exits_5_and_resumes(
    tmp_path: Path, fake: FakeBench, capsys: pytest.CaptureFixture[str]
) -> None:
    fake.fail_at = 30
    fake.failure = lambda: OSError(errno.ENOSPC, "No space left on device")
    assert run(["sweep", job_file(tmp_path), "--runs", str(tmp_path / "runs")]) == 5
    refused(capsys, 5, "No space left", "sweep --resume")
    (folder,) = (tmp_path / "runs").iterdir()
    fake.fail_at = None
    assert run(["sweep", "--resume", str(folder)]) == 0
    assert fake.resumed


def test_data_without_a_result_exit_6(
    tmp_path: Path, fake: FakeBench, capsys: pytest.CaptureFixture[str]
) -> None:
    fake.fail_at, fake.failure = 3, Killed
    with pytest.raises(Killed):
        sweep_job(JOB, tmp_path / "runs", QuietProgress(), opener(fake))
    (folder,) = (tmp_path / "runs").iterdir()
    assert run(["fit", str(folder)]) == 6
    refused(capsys, 6, "no step", "--resume")
    table = tmp_path / "table.csv"
    table.write_text("step,stage_deg,x_mm,y_mm\n0,0,50,0\n")
    demo = ["--bench", "demo:red-laser", "--part", "demo:shim-830"]
    assert run(["fit", str(table), *demo]) == 6
    refused(capsys, 6)


@pytest.mark.parametrize(
    ("failure", "code", "word"),
    [
        (lambda: KeyboardInterrupt(), 5, "stopped"),
        (lambda: PermissionError(13, "Permission denied", "x"), 4, "choose a folder"),
        (lambda: OSError(errno.ENOSPC, "No space left on device"), 4, "make space"),
        (lambda: MemoryError(), 4, "memory"),
        (lambda: ZeroDivisionError("division\nby zero"), 4, "report it"),
        (lambda: SweepStopped(Path("r"), "x"), 5, "--resume r"),
    ],
)
def test_whatever_breaks_is_two_plain_lines(
    failure: Callable[[], BaseException],
    code: int,
    word: str,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
) -> None:
    def broken(*_: object) -> None:
        raise failure()

    monkeypatch.setattr("pitchsweep.configs.reader.read_job", broken)
    assert run(["sweep", "demo:shims"]) == code
    refused(capsys, code, word)


def test_every_error_class_has_an_exit_code_of_the_contract() -> None:
    codes = {code for _, code in exit_codes.exit_table()}
    assert codes == {2, 3, 4, 5, 6}
    from pitchsweep.acquire import acquire_errors
    from pitchsweep.analysis import analysis_errors
    from pitchsweep.configs import config_errors
    from pitchsweep.drivers import driver_errors
    from pitchsweep.safety import safety_errors

    kinds = tuple(kind for kind, _ in exit_codes.exit_table())
    rooms = (
        acquire_errors,
        analysis_errors,
        config_errors,
        driver_errors,
        safety_errors,
    )
    for room in rooms:
        for item in vars(room).values():
            if isinstance(item, type) and issubclass(item, Exception):
                assert issubclass(item, kinds), item


def test_help_shows_every_verb_and_loads_nothing_heavy() -> None:
    script = (
        "import sys; from pitchsweep.acquire.cli import run; code = run(['--help']);"
        "heavy = {'numpy', 'scipy', 'cv2', 'pydantic', 'matplotlib', 'yaml'};"
        "print(sorted(heavy & set(sys.modules)), code)"
    )
    done = subprocess.run(
        [sys.executable, "-c", script], capture_output=True, text=True, check=True
    )
    assert done.stdout.splitlines()[-1] == "[] 0"
    for verb in ("sweep", "fit", "report"):
        assert f"  {verb} " in done.stdout


def test_the_version_is_the_one_installed(capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["--version"]) == 0
    assert capsys.readouterr().out == f"pitchsweep {version('pitchsweep')}\n"


def test_a_reader_that_leaves_early_is_no_failure() -> None:
    read_end, write_end = os.pipe()
    os.close(read_end)
    done = subprocess.run(
        [sys.executable, "-m", "pitchsweep.acquire", "--help"],
        stdout=write_end,
        stderr=subprocess.PIPE,
        text=True,
    )
    os.close(write_end)
    assert done.returncode == 0 and done.stderr == ""
