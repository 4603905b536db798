"""An image as a device hands it over -> a grey frame of uint16, or why not (pure)."""

from typing import Any

import numpy as np
from numpy.typing import NDArray

from pitchsweep.drivers.driver_errors import DeviceRefused

Frame = NDArray[np.uint16]

GREY_WITHIN = 2
"""Digital numbers by which the channels of a grey JPEG may differ after decoding."""


def grey_frame(image: NDArray[Any], *, bits: int) -> Frame:
    """``image`` (rows, columns), or grey in three channels, as uint16.

    ``bits`` is what the bench file says the camera gives. Raises DeviceRefused
    (wrong-frame) for colour and for pixels that cannot hold, or exceed, so many bits.
    """
    if image.ndim == 3:
        image = _one_channel(image)
    if image.dtype not in (np.uint8, np.uint16):
        raise _refusal(f"pixels of type {image.dtype}; frames are grey, 8 or 16 bit")
    holds = 8 * image.dtype.itemsize
    if (bits > 8) != (holds > 8):
        raise _refusal(
            f"an image of {holds} bits, and the bench file says camera.bits: {bits}"
        )
    return np.ascontiguousarray(image, dtype=np.uint16)


def luminance(image: NDArray[Any]) -> NDArray[Any]:
    """The first byte of every pair of a YUYV image (rows, columns, 2)."""
    if image.ndim != 3 or image.shape[2] != 2:
        raise _refusal(f"an image of shape {image.shape} is no YUYV")
    return image[:, :, 0]


def _one_channel(image: NDArray[Any]) -> NDArray[Any]:
    first = image[:, :, 0].astype(np.int32)
    for other in range(1, min(image.shape[2], 3)):
        if int(np.abs(image[:, :, other].astype(np.int32) - first).max()) > GREY_WITHIN:
            raise _refusal(
                f"a colour image of {image.shape[2]} channels; set the camera to grey"
            )
    return image[:, :, 0]


def _refusal(detail: str) -> DeviceRefused:
    return DeviceRefused("camera", "wrong-frame", detail)
