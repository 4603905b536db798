"""Image files that are damaged are refused in our words, not the decoder's."""

import cv2
import numpy as np
import pytest

from pitchsweep.analysis.analysis_errors import InputRefused
from pitchsweep.analysis.frame_image import decode_frame

FRAME = np.arange(200 * 30, dtype=np.uint16).reshape(30, 200)


def _png() -> bytes:
    done, content = cv2.imencode(".png", FRAME)
    assert done
    return content.tobytes()


def test_a_whole_image_comes_back_as_it_was() -> None:
    assert np.array_equal(decode_frame(_png(), name="a.png"), FRAME)


@pytest.mark.parametrize("damage", ["cut", "flipped", "no end"])
def test_a_damaged_image_is_refused_without_other_words(
    damage: str, capfd: pytest.CaptureFixture[str]
) -> None:
    whole = _png()
    content = {
        "cut": whole[: len(whole) // 2],
        "flipped": whole[:300] + bytes([whole[300] ^ 1]) + whole[301:],
        "no end": whole[:-12],
    }[damage]
    with pytest.raises(InputRefused, match=r"a\.png.*damaged"):
        decode_frame(content, name="a.png")
    assert capfd.readouterr() == ("", "")
