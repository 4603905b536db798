"""The one world of the twin: stage, light, part, bench time (acts).

Firmware and camera share it, from several threads. The renderer reads the truth, the
bench, the label and what is here; nothing from job, recipe or controller.
"""

import threading
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path

from pitchsweep.configs.bench_model import Bench
from pitchsweep.drivers.devices import AirReading, BenchReading, Label, SpotReading
from pitchsweep.drivers.twin.bench_sensors import (
    power_at_part_mw,
    read_air,
    read_power_mw,
)
from pitchsweep.drivers.twin.bench_time import BenchTime
from pitchsweep.drivers.twin.camera_readout import Exposing, TwinCamera
from pitchsweep.drivers.twin.effects import LaserState
from pitchsweep.drivers.twin.emission_unit import EmissionUnit
from pitchsweep.drivers.twin.fault_schedule import FaultSchedule
from pitchsweep.drivers.twin.kept_state import KeptState, read_state, write_state
from pitchsweep.drivers.twin.keyed_noise import keyed_generator
from pitchsweep.drivers.twin.repeated_steps import RepeatedSteps
from pitchsweep.drivers.twin.spots_door import spots
from pitchsweep.drivers.twin.stage_mechanics import Rest, StageMechanics, Windup
from pitchsweep.drivers.twin.truth import Truth, twin_settings

STALL_SHARE = 0.4
ASTRAY_DEG = 0.3
POWER_AFTER_DROP, POWER_AFTER_RISE = 0.7, 1.5
PERSON = "twin-person"
STRAY = SpotReading(x_mm=77.0, y_mm=44.0, ux_mm=0.1, uy_mm=0.1, brightness=0.02)
"""A reflection that is no order of the part."""


@dataclass(frozen=True)
class Seat:
    """How the part is seated: index of the mount, its angle, turn in its own plane.

    ``part`` says which of a lot it is.
    """

    mount: int
    mount_deg: float
    face_deg: float = 0.0
    part: int = 0


class World:
    """State that firmware, camera and the person on the spot share."""

    def __init__(
        self,
        truth: Truth,
        bench: Bench,
        unit: EmissionUnit,
        *,
        faults: FaultSchedule,
        state_path: Path,
        lot: Sequence[Truth] = (),
    ) -> None:
        """``lot``: the truth of each part of a lot; ``truth`` where there is none."""
        kept = read_state(state_path) or _first_state(truth.seed)
        settings = twin_settings(bench)
        self._truths = tuple(lot) or (truth,)
        self.bench = bench
        self.unit = unit
        self.time = BenchTime(kept.bench_s, settings.speed)
        self._faults = faults
        self._state_path = state_path
        self._lock = threading.RLock()
        effects = settings.effects
        self._stage = StageMechanics(
            kept.stage,
            backlash_deg=effects.backlash_deg,
            windup=Windup(
                effects.leftover_backlash_arcsec / 3600.0, effects.run_up_deg
            ),
        )
        self._saved = kept.stage
        self._seat = Seat(0, 0.0)
        self._laser = LaserState(kept.laser_shift_pm, kept.laser_power)
        self._out = False
        self.camera = TwinCamera(truth, bench, self.time)
        fresh = settings.repeated_noise == "fresh"
        self._repeated = RepeatedSteps(state_path.parent) if fresh else None
        faults.go_on_from(kept.seen)

    @property
    def truth(self) -> Truth:
        """What is true with the part that is in."""
        return self._truths[self._seat.part]

    # The stage, as its firmware sees it. Angles are readings.

    def stage_place(self) -> tuple[float, bool, bool, bool]:
        """Reading in degrees, turning, stalled, zero known."""
        with self._lock:
            now_s = self.time.now_s()
            self._save_at_rest(now_s)
            turning = self._stage.turning(now_s)
            stalled = self._stage.stalled and not turning
            homed = self._stage.homed(now_s)
            return self._stage.reading_deg(now_s), turning, stalled, homed

    def stage_travel_deg(self) -> tuple[float, float]:
        """Lowest and highest angle."""
        stage = self.bench.stage
        return stage.travel_min_deg, stage.travel_max_deg

    def stage_move(self, angle_deg: float, feed_deg_per_min: float) -> None:
        """Sets off; a fault on schedule may stop it, mislead it, cost it its zero."""
        with self._lock:
            now_s = self.time.now_s()
            fault = self._faults.due("stage-move")
            does = "" if fault is None else fault.does
            if does == "zero-lost":
                self._stage.lose_zero(now_s, _power_up_error_deg(self.truth.seed))
                return
            here_deg = self._stage.motor_deg(now_s)
            if does == "stall":
                angle_deg = here_deg + STALL_SHARE * (angle_deg - here_deg)
            if does == "wrong-place":
                angle_deg += ASTRAY_DEG
            speed = min(feed_deg_per_min / 60.0, self.bench.stage.speed_deg_per_s)
            self._stage.move(angle_deg, speed, now_s)
            self._stage.stalled = does == "stall"

    def stage_seek_zero(self) -> None:
        """Sets off to the zero mark."""
        with self._lock:
            speed = self.bench.stage.speed_deg_per_s
            self._stage.seek_zero(speed, self.time.now_s())

    def stage_halt(self) -> None:
        """Stops the stage where it is."""
        with self._lock:
            self._stage.halt(self.time.now_s())

    # What the controller asks of the bench.

    def wait(self, seconds: float) -> float:
        """Lets bench time pass; returns the bench time."""
        now_s = self.time.wait(seconds)
        with self._lock:
            self._save_at_rest(now_s)
        return now_s

    def seat(
        self, mount: int, mount_deg: float, face_deg: float = 0.0, part: int = 0
    ) -> None:
        """The person on the spot seats the part anew, or another one of the lot.

        Raises ValueError where there is no such part.
        """
        with self._lock:
            if not 0 <= part < len(self._truths):
                raise ValueError(f"there is no part number {part}")
            self._seat = Seat(mount, mount_deg, face_deg, part)
            self.camera.sees(self.truth)

    def cut_power(self) -> None:
        """The stage loses its zero and the unit its light, as in a power cut."""
        with self._lock:
            wrong_deg = _power_up_error_deg(self.truth.seed)
            self._stage.lose_zero(self.time.now_s(), wrong_deg)
            self.unit.dark("power cut")
            self._save_at_rest(self.time.now_s())

    def read_air(self) -> AirReading:
        """The air now, as the sensor says it."""
        return read_air(self.truth, self.bench, self.time.now_s())

    def sense(self, laser: str, planned_s: float) -> BenchReading:
        """Every sensor at a step's planned time; the power only while lit."""
        fault = self._faults.due("sensors")
        with self._lock:
            stage_deg, seat = self._stage.table_deg(self.time.now_s()), self._seat
            label = Label(seat.mount, laser, 0, 0, 0, planned_s, seat.face_deg)
            power_mw = read_power_mw(
                self.truth,
                self.bench,
                label,
                stage_deg=stage_deg,
                mount_deg=seat.mount_deg,
                laser_state=self._laser,
                lit=self.unit.is_lit() and not self._out,
            )
        air = None if fault else read_air(self.truth, self.bench, planned_s)
        return BenchReading(air, power_mw)

    def read_meter(self, laser: str) -> float:
        """What a meter where the part sits shows now, in mW; no fault falls due."""
        with self._lock:
            now_s = self.time.now_s()
            return power_at_part_mw(
                self.truth,
                self.bench,
                Label(self._seat.mount, laser, 0, 0, 0, now_s),
                stage_deg=self._stage.table_deg(now_s),
                mount_deg=self._seat.mount_deg,
                laser_state=self._laser,
                lit=self.unit.is_lit() and not self._out,
            )

    def ask_person(self, what: str) -> str:
        """The person does ``what``, which takes bench time; their name."""
        self.unit.note_person("asked")
        self.wait(60.0 * twin_settings(self.bench).person_min)
        self.unit.note_person("done")
        return PERSON

    def see_spots(self, label: Label) -> list[SpotReading]:
        """Spots of this moment: none in the dark, none while the stage turns."""
        with self._lock:
            now_s = self.time.now_s()
            stage_deg, seat = self._stage.table_deg(now_s), self._seat
            if self._stage.turning(now_s) or not self.unit.is_lit():
                return []
            does = self._light_fault()
        if does in ("dropout", "blocked"):
            return []
        label = self._as_seen(label, seat)
        seen = spots(
            self.truth,
            self.bench,
            label,
            stage_deg=stage_deg,
            mount_deg=seat.mount_deg,
            laser_state=self._laser,
        )
        return [*seen, STRAY] if does == "stray-spot" else seen

    def begin_exposure(self, exposure_ms: float, label: Label) -> Exposing:
        """Exposes from now on and returns when that is over; readout is not.

        Light that is not there from the first to the last moment gives a dark frame;
        a stage that turns meanwhile smears. In rehearsal the readout has passed too,
        so that bench time never depends on who asks for what first. Raises ValueError
        where the camera refuses.
        """
        fault = self._faults.due("exposure")
        does = "" if fault is None else fault.does
        self.camera.before(does)
        self.camera.wait_until_free()
        exposure_s = exposure_ms * 1e-3
        with self._lock:
            seat = self._seat
            start_s = self.time.now_s()
            start_deg = self._stage.table_deg(start_s)
            end_deg = self._stage.table_deg(start_s + exposure_s)
            lit = self.unit.is_lit()
            light = self._light_fault() if lit else ""
            laser_state = self._laser
        readout_s = self.bench.camera.readout_s
        self.wait(exposure_s if self.time.is_real else exposure_s + readout_s)
        lit = lit and self.unit.is_lit() and light not in ("dropout", "blocked")
        exposing = Exposing(
            label=self._as_seen(label, seat),
            exposure_ms=exposure_ms,
            lit=lit,
            stage_deg=start_deg,
            motion_deg=end_deg - start_deg,
            mount_deg=seat.mount_deg,
            laser_state=laser_state,
            does=does,
            began_s=start_s,
            ready_s=start_s + exposure_s + readout_s,
        )
        self.camera.exposed(exposing)
        return exposing

    def _as_seen(self, label: Label, seat: Seat) -> Label:
        label = replace(label, mount=seat.mount, face_deg=seat.face_deg)
        return label if self._repeated is None else self._repeated.fresh(label)

    def _light_fault(self) -> str:
        """What goes wrong with the light at this look at the screen, if anything."""
        fault = self._faults.due("light")
        does = "" if fault is None else fault.does
        self._out = does == "dropout"
        if does == "power-drop":
            self._laser = replace(self._laser, power=POWER_AFTER_DROP)
        if does == "power-rise":
            self._laser = replace(self._laser, power=POWER_AFTER_RISE)
        if does == "mode-hop":
            hop_pm = twin_settings(self.bench).effects.mode_hop_pm
            self._laser = replace(self._laser, shift_pm=hop_pm)
        return does

    def save(self) -> None:
        """Keeps the present state durably."""
        with self._lock:
            now_s = self.time.now_s()
            self._saved = self._stage.rest(now_s)
            state = KeptState(
                stage=self._saved,
                bench_s=now_s,
                seen=self._faults.seen(),
                laser_shift_pm=self._laser.shift_pm,
                laser_power=self._laser.power,
            )
            write_state(self._state_path, state)

    def _save_at_rest(self, now_s: float) -> None:
        if self._stage.turning(now_s):
            return
        if self._stage.rest(now_s) != self._saved:
            self.save()


def _first_state(seed: int) -> KeptState:
    """A stage that nobody has homed: it stands somewhere and shows zero."""
    somewhere_deg = float(keyed_generator(seed, "stage at first").uniform(-20.0, 20.0))
    return KeptState(Rest(somewhere_deg, 0.0, False, somewhere_deg), 0.0)


def _power_up_error_deg(seed: int) -> float:
    return float(keyed_generator(seed, "stage after power cut").uniform(-90.0, 90.0))
