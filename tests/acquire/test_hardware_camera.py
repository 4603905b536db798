"""Cameras of a bench with ports that will not do: exit 4, one line, no light."""

from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from emulated_bench import EmulatedBench
from hardware_builders import emulated, lit, twin_job
from sign_off_builders import Office, office, signed, work_of

from pitchsweep.acquire.cli import run
from pitchsweep.configs.frozen_job import freeze

CAMERA_FAILURES: dict[str, tuple[str, dict[str, Any], str]] = {
    "wrong size": ("camera small", {}, "gives 512 x 80 pixels, the bench file says"),
    "automatic": ("camera auto", {}, "automatic: its images say exposure is automatic"),
    "colour": ("camera colour", {}, "a colour image of 3 channels"),
    "lossy": ("camera lossy", {}, "a lossy JPEG"),
    "fewer bits": ("camera eight-bit", {}, "an image of 8 bits, and the bench file"),
    "busy": ("camera busy", {}, "HTTP 503"),
    "hangs up": ("camera silent", {}, "Remote end closed connection"),
    "refused": ("unplug-camera", {}, "failed: Connection refused"),
    "no such device": (
        "camera",
        {"by": "usb-video", "address": "/dev/video-none", "pixel_format": "Y16"},
        "opening failed: /dev/video-none: No such file or directory",
    ),
    "no camera": (
        "camera",
        {"by": "usb-video", "address": "/dev/null", "pixel_format": "Y16"},
        "opening failed: /dev/null is no video device",
    ),
}


@pytest.fixture
def at(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Office:
    made = office(tmp_path)
    monkeypatch.setenv("PITCHSWEEP_HOME", str(made.home.folder))
    return made


@pytest.fixture(scope="module")
def standing(tmp_path_factory: pytest.TempPathFactory) -> Iterator[EmulatedBench]:
    with emulated(tmp_path_factory.mktemp("standing"), twin_job()) as bench:
        yield bench


@pytest.mark.parametrize("name", [n for n in CAMERA_FAILURES if n != "refused"])
def test_a_camera_that_will_not_do_exits_4_in_one_line(
    name: str,
    tmp_path: Path,
    at: Office,
    standing: EmulatedBench,
    capsys: pytest.CaptureFixture[str],
) -> None:
    word, camera, words = CAMERA_FAILURES[name]
    _camera_fails(standing, word, camera, words, tmp_path, at, capsys)
    standing.tell("camera")


def test_a_camera_that_nobody_serves_exits_4_in_one_line(
    tmp_path: Path, at: Office, capsys: pytest.CaptureFixture[str]
) -> None:
    with emulated(tmp_path, twin_job()) as bench:
        word, camera, words = CAMERA_FAILURES["refused"]
        _camera_fails(bench, word, camera, words, tmp_path, at, capsys)


def _camera_fails(
    bench: EmulatedBench,
    word: str,
    camera: dict[str, Any],
    words: str,
    folder: Path,
    at: Office,
    capsys: pytest.CaptureFixture[str],
) -> None:
    if camera:
        job = bench.job()
        assert job.bench.ports is not None
        port = type(job.bench.ports.camera).model_validate(camera)
        ports = job.bench.ports.model_copy(update={"camera": port})
        job = job.model_copy(
            update={"bench": job.bench.model_copy(update={"ports": ports})}
        )
    else:
        job = bench.job()
    (folder / "job.yaml").write_text(freeze(job))
    signed(at, work_of(job))
    bench.tell(word)
    arguments = ["sweep", str(folder / "job.yaml"), "--runs", str(folder / "runs")]
    assert run(arguments) == 4
    said = [x for x in capsys.readouterr().err.splitlines() if "pitchsweep:" in x]
    assert len(said) == 1 and words in said[0] and "camera" in said[0]
    assert lit(bench) == []
