"""The twin's camera after the exposure: readout, rendering, what fails there (acts).

What a frame shows is fixed when its exposure ends; it may be read out and drawn while
the stage already turns. One frame at a time is read out.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pitchsweep.configs.bench_model import Bench
from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.twin.bench_time import BenchTime
from pitchsweep.drivers.twin.camera_faults import CameraFaults, Exposed, NoFrame
from pitchsweep.drivers.twin.effects import LaserState
from pitchsweep.drivers.twin.photons_door import render
from pitchsweep.drivers.twin.prepared_frames import PreparedFrames
from pitchsweep.drivers.twin.truth import Truth, twin_settings


@dataclass(frozen=True)
class Exposing:
    """An exposure that is over: all that its frame depends on.

    ``does`` is the fault that befell it, if any; the frame may be handed over from the
    bench time ``ready_s`` on.
    """

    label: Label
    exposure_ms: float
    lit: bool
    stage_deg: float
    motion_deg: float
    mount_deg: float
    laser_state: LaserState
    does: str
    began_s: float
    ready_s: float


class TwinCamera:
    """Reads exposures out; busy with one until its ``ready_s``."""

    def __init__(self, truth: Truth, bench: Bench, time: BenchTime) -> None:
        self._truth = truth
        self._bench = bench
        self._time = time
        prepared = twin_settings(bench).frames == "prepared"
        self._is_prepared = prepared
        self._prepared = PreparedFrames(truth, bench) if prepared else None
        self._faults = CameraFaults(bench.camera)
        self._free_s = float("-inf")

    @property
    def index(self) -> int:
        """Under which index the camera is found; another one after it was gone."""
        return self._faults.index

    def sees(self, truth: Truth) -> None:
        """What is true from now on; frames of before must have been read out."""
        if truth is self._truth:
            return
        self._truth = truth
        if self._is_prepared:
            self._prepared = PreparedFrames(truth, self._bench)

    def before(self, does: str) -> None:
        """Raises ValueError where an exposure with this fault does not even begin."""
        self._faults.before(does)

    def wait_until_free(self) -> None:
        """Lets the readout of the exposure before pass."""
        self._time.wait_until(self._free_s)

    def exposed(self, exposing: Exposing) -> None:
        """Busy with this one from now on."""
        self._free_s = exposing.ready_s

    def read_out(self, exposing: Exposing) -> Exposed:
        """The frame of ``exposing``, not before its time. Raises NoFrame."""
        if exposing.does == "no-frame":
            self._time.wait_until(exposing.ready_s)
            raise NoFrame("no frame came from the camera")
        good = Exposed(self._frame(exposing), exposing.began_s, exposing.ready_s)
        return self._faults.after(exposing.does, good)

    def _frame(self, taken: Exposing) -> NDArray[np.uint16]:
        if self._prepared is not None:
            return self._prepared.frame(
                taken.label,
                exposure_ms=taken.exposure_ms,
                light_on=taken.lit,
                stage_deg=taken.stage_deg,
                mount_deg=taken.mount_deg,
            )
        return render(
            self._truth,
            self._bench,
            taken.label,
            exposure_ms=taken.exposure_ms,
            light_on=taken.lit,
            stage_deg=taken.stage_deg,
            mount_deg=taken.mount_deg,
            motion_deg=taken.motion_deg,
            laser_state=taken.laser_state,
        )
