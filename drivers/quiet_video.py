"""Keeps OpenCV's own words off the terminal: our errors say what went wrong (acts)."""

import os


def quiet_video() -> None:
    """Silences OpenCV and the decoders below it, for this process."""
    # Read by OpenCV when it opens its first stream.
    os.environ.setdefault("OPENCV_FFMPEG_LOGLEVEL", "-8")
    import cv2

    # Older and newer versions keep this in different places.
    logging = getattr(cv2.utils, "logging", None)
    if logging is not None:
        logging.setLogLevel(logging.LOG_LEVEL_SILENT)
