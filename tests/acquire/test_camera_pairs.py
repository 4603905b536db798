"""A camera is calibrated from frame pairs on disk, at the terminal."""

import json
from pathlib import Path

import cv2
import numpy as np
import pytest

from pitchsweep.acquire.cli import run
from pitchsweep.configs.reader import find

WIDTH, HEIGHT = 320, 200
GAIN, READ_E, BLACK, FULL_E = 0.4, 5.0, 64.0, 9000.0
TIMES_MS = (2.0, 5.0, 10.0, 15.0, 20.0, 40.0)


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """Pairs of a 12-bit camera, stored in the high bits of 16, and its bench file."""
    rng = np.random.default_rng(3)
    lines = ["file,exposure_ms,light"]
    for time_ms in (0.0, *TIMES_MS):
        for nth in (1, 2):
            light = rng.poisson(time_ms / 30.0 * FULL_E, (HEIGHT, WIDTH))
            electrons = np.minimum(light, FULL_E)
            electrons = electrons + READ_E * rng.standard_normal(electrons.shape)
            frame = np.clip(np.rint(GAIN * electrons + BLACK), 0, 4095)
            name = f"t{time_ms:g}-{nth}.png"
            cv2.imwrite(str(tmp_path / name), (frame * 16.0).astype(np.uint16))
            lit = "on" if time_ms else "off"
            lines.append(f"{name},{time_ms or 10.0:g},{lit}")
    (tmp_path / "pairs.csv").write_text("\n".join(lines) + "\n", encoding="utf-8")
    bench = find("demo:red-laser", "benches").read_text(encoding="utf-8")
    for key, value in (("width_px", WIDTH), ("height_px", HEIGHT)):
        old = next(line for line in bench.splitlines() if line.strip().startswith(key))
        bench = bench.replace(old, f"  {key}: {value}")
    (tmp_path / "bench.yaml").write_text(bench, encoding="utf-8")
    return tmp_path


def test_the_camera_that_took_the_frames_is_found(
    folder: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    given = ["bench", "calibrate", str(folder / "bench.yaml"), str(folder)]
    assert run([*given, "--json"]) == 0
    seen = json.loads(capsys.readouterr().out)
    # The pairs hold 64 000 pixels a frame: the gain is known to about half a percent.
    assert seen["gain_dn_per_e"] == pytest.approx(GAIN, rel=0.02)
    assert seen["read_noise_e"] == pytest.approx(READ_E, rel=0.03)
    assert seen["black_level_dn"] == pytest.approx(BLACK, abs=0.1)
    assert seen["linearity"] < 0.01
    assert run(given) == 0
    said = capsys.readouterr().out
    assert f"gain_dn_per_e: {seen['gain_dn_per_e']:.4g}" in said


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ("file,exposure_ms,light", "file,ms,light", "line 1"),
        ("t5-2.png,5,on\n", "", "1 frames of 5 ms, light on"),
        ("t5-1.png,5,on", "t5-1.png,0,on", "line 6, column exposure_ms"),
        ("t5-1.png,5,on", "t5-1.png,5,bright", "column light"),
        ("t0-1.png,10,off", "t0-1.png,11,off", "dark frames of 2 exposures"),
        ("t5-1.png,5,on", "none.png,5,on", "none.png"),
    ],
)
def test_a_bad_list_is_refused(
    folder: Path, old: str, new: str, words: str, capsys: pytest.CaptureFixture[str]
) -> None:
    path = folder / "pairs.csv"
    text = path.read_text(encoding="utf-8")
    assert old in text
    path.write_text(text.replace(old, new), encoding="utf-8")
    given = ["bench", "calibrate", str(folder / "bench.yaml"), str(folder)]
    assert run(given) == 2
    said = capsys.readouterr().err
    assert "pairs.csv" in said and words in said and "Traceback" not in said


def test_pairs_that_tell_nothing_are_refused(
    folder: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = folder / "pairs.csv"
    kept = [
        line
        for line in path.read_text(encoding="utf-8").splitlines()
        if not line.startswith(("t2-", "t5-", "t10-"))
    ]
    path.write_text("\n".join(kept) + "\n", encoding="utf-8")
    given = ["bench", "calibrate", str(folder / "bench.yaml"), str(folder)]
    assert run(given) == 2
    assert "levels lie below 70 % of saturation" in capsys.readouterr().err
