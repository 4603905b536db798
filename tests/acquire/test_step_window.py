"""The picture of one step: drawn from a run's frames, asked for on the command line."""

from pathlib import Path

import cv2
import numpy as np
import pytest
from acquire_fakes import FakeBench, QuietProgress, opener, small_job
from scenes import scene_job
from twin_photons import seen_step

from pitchsweep.acquire.acquire_errors import RunRefused
from pitchsweep.acquire.cli import run
from pitchsweep.acquire.run_table import read_run
from pitchsweep.acquire.step_window import (
    OrderTold,
    step_picture,
    windows_shown,
)
from pitchsweep.acquire.sweep_session import sweep_job
from pitchsweep.analysis.camera_noise import CameraNoise
from pitchsweep.analysis.records import Rejection
from pitchsweep.analysis.spot_search import look
from pitchsweep.drivers.twin.truth import draw_truth


@pytest.fixture(scope="module")
def run_folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    fake = FakeBench(small_job(record="frames", step_deg=10.0, exposures_ms=(5.0,)))
    folder = tmp_path_factory.mktemp("runs")
    return sweep_job(fake.job, folder, QuietProgress(), opener(fake)).path


def test_report_with_a_step_writes_its_picture_and_says_where(
    run_folder: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    steps = read_run(run_folder).steps
    step = max(steps, key=lambda kept: len(kept.found.spots)).row.step
    assert run(["report", str(run_folder), "--step", str(step)]) == 0
    written = Path(capsys.readouterr().out.strip())
    assert written == run_folder / f"step-{step}.png"
    image = cv2.imread(str(written))
    assert image is not None and image.shape[1] > 1000
    assert written.read_bytes() == step_picture(run_folder, step, None)
    assert written.read_bytes() != step_picture(run_folder, step, 2)
    # Green windows of accepted spots are on it.
    blue, green, red = (image[..., k].astype(int) for k in range(3))
    assert np.count_nonzero((green > red + 20) & (green > blue + 10)) > 50


def test_steps_and_candidates_that_are_not_there_are_refused(run_folder: Path) -> None:
    with pytest.raises(RunRefused, match="step 99 is not acknowledged"):
        step_picture(run_folder, 99, None)
    with pytest.raises(RunRefused, match="candidates"):
        step_picture(run_folder, 1, 99)
    assert run(["report", str(run_folder), "--spot", "1"]) == 2


def test_the_picture_names_marks_orders_and_what_the_fit_left_out() -> None:
    job = scene_job("all-marks")
    truth = draw_truth(job.bench, job.part, 1)
    step = seen_step(job, truth, -12.0, step=7)
    noise = CameraNoise.from_bench(job.bench.camera)
    seen = look(step.exposures, step.dark.astype(np.float32), noise)
    zero = step.place_mm[int(np.argmin(np.abs(step.order)))]
    orders = [OrderTold(zero[0], zero[1], "0"), OrderTold(97.9, -1.9, "")]
    shown = windows_shown(seen, job.bench, 7, orders)
    told = [window.verdict for window in shown]
    assert sum(text == "a mark of the screen frame, no spot" for text in told) == 4
    (order,) = [window for window in shown if window.verdict.startswith("order 0: ")]
    assert order.accepted
    (stray,) = [w for w in shown if w.verdict.startswith("not in the fit: ")]
    assert not stray.accepted
    reasons = {text.split(":")[0] for text in told if "score" in text}
    assert reasons and reasons <= {reason.value for reason in Rejection}
