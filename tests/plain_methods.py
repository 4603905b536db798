"""What a user would otherwise take to find spots: one function a general library.

Each gives (column, row) of what it finds in a frame (rows, columns) of unknown noise,
with settings that suit radii of 3 to 12 px. Libraries are imported where used; those
beyond OpenCV come with the ``bench`` extra.
"""

from collections.abc import Callable
from typing import Any

import cv2
import numpy as np
from numpy.typing import NDArray

Frame = NDArray[np.uint16]
Places = list[tuple[float, float]]


def level_and_noise(image: NDArray[Any]) -> tuple[float, float]:
    """Median and robust width of every eighth pixel both ways."""
    sample = image[::8, ::8].astype(np.float64)
    middle = float(np.median(sample))
    return middle, 1.4826 * float(np.median(np.abs(sample - middle))) + 1e-3


def components_moments(frame: Frame) -> Places:
    """OpenCV: blur, threshold at five widths, components, grey moments of each."""
    smooth = cv2.GaussianBlur(frame, (5, 5), 0)
    level, noise = level_and_noise(smooth)
    mask = (smooth > level + 5.0 * noise).astype(np.uint8)
    count, labels, stats, _ = cv2.connectedComponentsWithStats(mask)
    out: Places = []
    for k in range(1, count):
        left, top, wide, high, area = (int(v) for v in stats[k])
        if area < 5:
            continue
        box = (slice(top, top + high), slice(left, left + wide))
        light = np.where(labels[box] == k, frame[box] - level, 0.0).astype(np.float32)
        m = cv2.moments(light)
        if m["m00"] <= 0.0:
            continue
        out.append((left + m["m10"] / m["m00"], top + m["m01"] / m["m00"]))
    return out


def simple_blobs(frame: Frame) -> Places:
    """OpenCV's SimpleBlobDetector on the frame stretched to 8 bits."""
    level, noise = level_and_noise(frame)
    top = level + max(60.0 * noise, 1.0)
    grey = np.clip((frame - level) * (255.0 / (top - level)), 0, 255).astype(np.uint8)
    settings = cv2.SimpleBlobDetector.Params()
    settings.filterByColor = True
    settings.blobColor = 255
    settings.filterByArea = True
    settings.minArea, settings.maxArea = 12.0, 20000.0
    settings.filterByCircularity = False
    settings.filterByConvexity = False
    settings.filterByInertia = False
    settings.minThreshold, settings.maxThreshold = 25.0, 250.0
    settings.thresholdStep = 25.0
    found = cv2.SimpleBlobDetector.create(settings).detect(grey)
    return [(float(k.pt[0]), float(k.pt[1])) for k in found]


def blob_log(frame: Frame) -> Places:
    """scikit-image's Laplacian of Gaussian at four scales."""
    from skimage.feature import blob_log as search

    level, noise = level_and_noise(frame)
    image = (frame.astype(np.float64) - level) / (200.0 * noise)
    found = search(image, min_sigma=3, max_sigma=12, num_sigma=4, threshold=0.02)
    return [(float(x), float(y)) for y, x, *_ in found]


def trackpy_locate(frame: Frame) -> Places:
    """trackpy's band pass, local maxima and refined centroids."""
    import trackpy

    trackpy.quiet()
    level, noise = level_and_noise(frame)
    found = trackpy.locate(frame, diameter=31, minmass=400.0 * noise, separation=40)
    return [(float(x), float(y)) for x, y in zip(found["x"], found["y"], strict=True)]


def photutils_gaussian(frame: Frame) -> Places:
    """photutils' star finder on the background-subtracted frame, then 2-D Gaussians."""
    from photutils.background import Background2D, MedianBackground
    from photutils.centroids import centroid_2dg
    from photutils.detection import DAOStarFinder

    image = frame.astype(np.float64)
    room = Background2D(image, (128, 128), bkg_estimator=MedianBackground())
    clear = image - room.background
    _, noise = level_and_noise(frame)
    finder = DAOStarFinder(threshold=4.0 * noise, fwhm=14.0, n_brightest=40)
    found = finder(clear)
    if found is None:
        return []
    names = found.colnames
    xs = found["x_centroid" if "x_centroid" in names else "xcentroid"]
    ys = found["y_centroid" if "y_centroid" in names else "ycentroid"]
    out: Places = []
    for x, y in zip(xs, ys, strict=True):
        left, top = max(int(x) - 30, 0), max(int(y) - 30, 0)
        box = clear[top : top + 61, left : left + 61]
        cx, cy = centroid_2dg(box)
        out.append((left + float(cx), top + float(cy)))
    return out


METHODS: dict[str, Callable[[Frame], Places]] = {
    "OpenCV components+moments": components_moments,
    "OpenCV SimpleBlobDetector": simple_blobs,
    "scikit-image blob_log": blob_log,
    "trackpy locate": trackpy_locate,
    "photutils star finder+Gaussian": photutils_gaussian,
}
