"""A folder of frames says which of its spots no exposure shows whole."""

from pathlib import Path

import cv2
import numpy as np
import pytest
from builders import demo_job
from spot_frames import Scene, TrueSpot, camera, expose

from pitchsweep.acquire.frame_set import input_from_frames


@pytest.mark.parametrize("height", [20.0, 6000.0])
def test_spots_saturated_in_every_exposure_are_warned_of(
    tmp_path: Path, height: float
) -> None:
    job = demo_job("track-1600-red")
    cam = job.bench.camera
    scene = Scene(
        (TrueSpot(500.3, 0.5 * cam.height_px + 3.0, height, (4.0, 4.0)),),
        columns=cam.width_px,
        rows=cam.height_px,
    )
    assert cam.bits == 12
    exposures, _ = expose(scene, camera(12), (2.0, 6.0), 0)
    rows = ["file,step,stage_deg,mount_deg,laser,exposure_ms"]
    for number, exposure in enumerate(exposures):
        frame = np.asarray(exposure.frame)
        cv2.imwrite(str(tmp_path / f"{number}.png"), frame)
        rows.append(f"{number}.png,0,5,0,red,{exposure.exposure_ms:g}")
    (tmp_path / "frames.csv").write_text("\n".join(rows) + "\n")
    given = input_from_frames(tmp_path, job.bench, job.part, 0.95, "red")
    told = [w for w in given.warnings if "saturated in every exposure" in w]
    assert len(told) == (1 if height > 1000.0 else 0)
    assert len(given.table.step) == 1
