"""The beam map's picture: drawn for closed, open and undeclared surroundings."""

import cv2
import numpy as np
import pytest
from beam_map_builders import ALL_ROUND, job_within, surface
from builders import demo_job

from pitchsweep.configs.job_model import Job
from pitchsweep.safety.beam_map import beam_map
from pitchsweep.safety.beam_map_picture import beam_map_png, beam_map_svg

MIRROR = surface("post", 170.0, 190.0, -9.0, 9.0, what="post", acts_as="mirror")


def purple_share(png: bytes) -> float:
    """The share of pixels that are reddish, as only the marks of danger are."""
    image = cv2.imdecode(np.frombuffer(png, np.uint8), cv2.IMREAD_COLOR)
    assert image is not None
    blue, green, red = (image[..., i].astype(float) for i in range(3))
    return float(((red - green > 25.0) & (blue - green > 10.0)).mean())


@pytest.mark.parametrize(
    ("job", "danger"),
    [
        (demo_job("track-740-green"), False),
        (job_within([MIRROR, ALL_ROUND], name="track-740-green"), False),
        (job_within([surface("wall", -9, 9, -9, 9)], name="track-740-green"), True),
        (demo_job("track-740-green", bench={"enclosure": None}), True),
    ],
    ids=["closed", "mirror", "open", "undeclared"],
)
def test_what_is_not_stopped_is_marked(job: Job, danger: bool) -> None:
    png = beam_map_png(job, beam_map(job), "green")
    assert (purple_share(png) > 0.05) is danger


def test_the_same_map_gives_the_same_picture() -> None:
    job = demo_job("track-740-green")
    found = beam_map(job)
    first, second = (beam_map_svg(job, found, "green") for _ in range(2))
    assert first == second and first.count("<svg") == 1
