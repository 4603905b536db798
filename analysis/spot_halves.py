"""Where two spots may be in what was taken for one (pure)."""

import cv2
import numpy as np

from pitchsweep.analysis.spot_scene import FittedCandidate
from pitchsweep.analysis.spot_shape import Shape

_CORE, _ROUNDS = 0.2, 6


def halves(item: FittedCandidate) -> tuple[Shape, Shape]:
    """Two round spots, one in each half of the bright part along its longer axis."""
    fit, window = item.fit, item.window
    seen = fit.signal + np.where(fit.weight > 0.0, fit.residual, 0.0)
    smooth = np.asarray(cv2.GaussianBlur(seen, (0, 0), 1.0), dtype=np.float64)
    top = float(smooth.max())
    light = np.where(smooth > _CORE * top, smooth, 0.0).ravel()
    x = np.broadcast_to(window.x, smooth.shape).ravel()
    y = np.broadcast_to(window.y, smooth.shape).ravel()
    places = np.stack([x, y])[:, light > 0.0]
    light = light[light > 0.0]
    middle = places @ light / light.sum()
    off = places - middle[:, None]
    values, axes = np.linalg.eigh((off * light) @ off.T / light.sum())
    radius = max(1.3 * float(values[0]) ** 0.5, 1.0)
    reach = float(values[1]) ** 0.5 * axes[:, 1]
    centres = [middle - reach, middle + reach]
    for _ in range(_ROUNDS):
        away = [((places - c[:, None]) ** 2).sum(axis=0) for c in centres]
        near = [away[0] <= away[1], away[0] > away[1]]
        if not (near[0].any() and near[1].any()):
            break
        centres = [places[:, n] @ light[n] / light[n].sum() for n in near]
    height = 0.9 * top
    one, other = (Shape.round_spot(height, c[0], c[1], radius) for c in centres)
    return one, other
