"""Frames for timing: noise made beforehand, the light of each step drawn into it.

Not for measuring: a few noise patterns serve every frame, and light carries no shot
noise. What costs time in a rendered frame, noise and quantising, is done before.
"""

import numpy as np
from numpy.typing import NDArray

from pitchsweep.configs.bench_model import Bench
from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.twin.camera_noise import digitise
from pitchsweep.drivers.twin.effects import single_step
from pitchsweep.drivers.twin.keyed_noise import keyed_generator
from pitchsweep.drivers.twin.light_patches import add_blob
from pitchsweep.drivers.twin.photons_door import blobs_of
from pitchsweep.drivers.twin.truth import Truth, twin_settings

PATTERNS = 4
REACH_SIGMA = 8.0


class PreparedFrames:
    """Makes its noise when it is made; ``frame`` is quick after that."""

    def __init__(self, truth: Truth, bench: Bench) -> None:
        camera = bench.camera
        self._truth = truth
        self._bench = bench
        shape = (camera.height_px, camera.width_px)
        self._patterns = [
            digitise(
                np.zeros(shape),
                camera=camera,
                exposure_ms=1.0,
                seed=truth.seed,
                hot_count=0,
                noise=keyed_generator(truth.seed, "prepared noise", exposure=number),
            )
            for number in range(PATTERNS)
        ]
        self._light = np.zeros(shape)
        self._taken = 0

    def frame(
        self,
        label: Label,
        *,
        exposure_ms: float,
        light_on: bool,
        stage_deg: float,
        mount_deg: float,
    ) -> NDArray[np.uint16]:
        """A frame (rows, columns) like the renderer's, without light's own noise."""
        self._taken += 1
        frame = self._patterns[self._taken % PATTERNS].copy()
        if not light_on:
            return frame
        camera, effects = self._bench.camera, twin_settings(self._bench).effects
        steps = single_step(label, stage_deg=stage_deg, mount_deg=mount_deg)
        full = 2**camera.bits - 1
        for blob in blobs_of(self._truth, self._bench, steps, exposure_ms):
            add_blob(self._light, blob, effects)
            wide, high = REACH_SIGMA * np.sqrt(np.diag(blob.covariance_px2))
            rows = _span(blob.row, high, camera.height_px)
            columns = _span(blob.column, wide, camera.width_px)
            light = self._light[rows, columns] * camera.gain_dn_per_e
            there = frame[rows, columns] + light
            frame[rows, columns] = np.minimum(there, full).astype(np.uint16)
            self._light[rows, columns] = 0.0
        return frame


def _span(centre: float, reach: float, size: int) -> slice:
    low, high = int(centre - reach), int(centre + reach) + 2
    return slice(min(max(low, 0), size), min(max(high, 0), size))
