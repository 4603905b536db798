"""The pictures of a report, one function each: values in, SVG text or PNG bytes out.

Importing this module loads matplotlib; nothing does so before a picture is wanted.
"""

from pitchsweep.analysis.budget_picture import budget_svg
from pitchsweep.analysis.frame_strip import frames_png
from pitchsweep.analysis.pitch_seen_picture import pitches_seen_svg
from pitchsweep.analysis.residual_picture import residuals_svg
from pitchsweep.analysis.summary_picture import summary_png
from pitchsweep.analysis.track_picture import tracks_svg

__all__ = [
    "budget_svg",
    "frames_png",
    "pitches_seen_svg",
    "residuals_svg",
    "summary_png",
    "tracks_svg",
]
