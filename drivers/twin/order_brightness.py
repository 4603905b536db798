"""How bright each order is: a scalar relief grating, good enough for a hint.

A sinusoidal relief of depth h gives order m the share J_m(phase)^2, with
phase = (pi h / lambda)(cos a + cos b) in reflection (scalar theory; J. W. Goodman,
Introduction to Fourier Optics, treats the thin sinusoidal phase grating).
"""

import numpy as np
from numpy.typing import NDArray
from scipy.special import jv

from pitchsweep.drivers.twin.rays import FloatArray

FAINTEST = 3e-4
"""Share of the beam below which neither door shows an order."""

_FLOOR = 2e-3
_TAPER = 0.15
_REFERENCE_NM = 532.0


def order_share(
    order: NDArray[np.int64],
    *,
    cos_in: FloatArray,
    cos_out: FloatArray,
    wavelength_nm: float,
    relief: float,
    lean: float,
) -> FloatArray:
    """Share of the beam's power in each order, in the broadcast shape of the inputs.

    ``relief`` is the phase in radians at normal incidence and 532 nm, ``lean`` makes
    one side brighter. Orders stay above a floor so that the brightest and faintest
    differ by no more than some hundred times, and fade where they leave at grazing.
    """
    phase = relief * _REFERENCE_NM / wavelength_nm * (cos_in + cos_out) / 2.0
    plain = jv(order, phase) ** 2 * np.exp(lean * order)
    fade = np.minimum(1.0, cos_out / _TAPER)
    return np.asarray(np.maximum(plain, _FLOOR) * fade)
