"""The rotation stage as the sweep sees it (acts).

Questions have deadlines on the real clock; motion is waited for in bench time.
"""

from pitchsweep.configs.bench_model import Stage as StageSettings
from pitchsweep.drivers.devices import BenchClock, StageReading
from pitchsweep.drivers.dialect import Answer
from pitchsweep.drivers.driver_errors import AskedIllegal, DeviceRefused
from pitchsweep.drivers.line_client import LineClient

ANSWER_TIMEOUT_S = 2.0
POLL_S = 0.05
MOTION_SLACK_S = 3.0
HOMING_SLACK_S = 30.0


class StageClient:
    """A Stage. ``move_to`` always arrives turning upwards over ``approach_deg``."""

    def __init__(
        self,
        line: LineClient,
        clock: BenchClock,
        settings: StageSettings,
        *,
        timeout_s: float = ANSWER_TIMEOUT_S,
    ) -> None:
        self._line = line
        self._clock = clock
        self._settings = settings
        self._timeout_s = timeout_s

    def identify(self) -> str:
        """The identity that the stage states."""
        return self._ask("identify").word("identity")

    def where(self) -> StageReading:
        """What the stage reads now. DeviceRefused (stalled) where it stalled."""
        place = self._ask("where")
        if place.word("motion") == "STALLED":
            at_deg = place.number_of("angle_deg")
            raise DeviceRefused("stage", "stalled", f"stands at {at_deg:.4f} deg")
        return StageReading(
            angle_deg=place.number_of("angle_deg"),
            turning=place.word("motion") == "TURNING",
            homed=place.word("zero") == "ZERO-KNOWN",
        )

    def home(self) -> None:
        """Searches the zero mark and waits until it is found.

        Raises DeviceRefused (still-turning, stalled, not-homed).
        """
        self._ask("home")
        full_turn_s = 360.0 / self._settings.speed_deg_per_s
        reading = self._wait_for_rest(0.0, full_turn_s + HOMING_SLACK_S, "zero")
        if not reading.homed:
            raise DeviceRefused("stage", "not-homed", "the search found no zero")

    def move_to(self, angle_deg: float) -> StageReading:
        """The reading at rest at ``angle_deg``, approached from below.

        Settling is not waited for. Raises AskedIllegal outside the travel (approach
        included), DeviceRefused (not-homed, stalled, still-turning, wrong-place).
        """
        start_deg = angle_deg - self._settings.approach_deg
        self._check_travel(start_deg)
        self._check_travel(angle_deg)
        here = self._at_rest()
        self._check_zero(here)
        if here.angle_deg > start_deg:
            here = self._leg(here.angle_deg, start_deg)
        return self._leg(here.angle_deg, angle_deg)

    def _at_rest(self) -> StageReading:
        """Where it stands; what an earlier motion left turning or stalled is halted."""
        try:
            here = self.where()
        except DeviceRefused as error:
            if error.reason != "stalled":
                raise
        else:
            if not here.turning:
                return here
        self.halt()
        return self.where()

    def halt(self) -> None:
        """Stops a motion where it is."""
        self._ask("halt")

    def close(self) -> None:
        """Closes the line."""
        self._line.close()

    def _leg(self, from_deg: float, to_deg: float) -> StageReading:
        speed = self._settings.speed_deg_per_s
        self._ask("move", angle_deg=to_deg, feed_deg_per_min=60.0 * speed)
        motion_s = abs(to_deg - from_deg) / speed
        slack_s = MOTION_SLACK_S + 0.5 * motion_s
        reading = self._wait_for_rest(motion_s, slack_s, f"{to_deg:.4f} deg")
        self._check_zero(reading)
        if abs(reading.angle_deg - to_deg) > self._settings.angle_tolerance_deg:
            raise DeviceRefused(
                "stage",
                "wrong-place",
                f"sent to {to_deg:.4f} deg, stands at {reading.angle_deg:.4f} deg",
            )
        return reading

    def _wait_for_rest(
        self, expected_s: float, slack_s: float, target: str
    ) -> StageReading:
        self._clock.wait(expected_s)
        waited_s = 0.0
        reading = self.where()
        while reading.turning:
            if waited_s >= slack_s:
                total_s = expected_s + waited_s
                detail = f"on its way to {target} for {total_s:.1f} s of bench time"
                raise DeviceRefused("stage", "still-turning", detail)
            self._clock.wait(POLL_S)
            waited_s += POLL_S
            reading = self.where()
        return reading

    def _check_travel(self, angle_deg: float) -> None:
        low, high = self._settings.travel_min_deg, self._settings.travel_max_deg
        if not low <= angle_deg <= high:
            raise AskedIllegal("stage angle", angle_deg, f"{low:g} to {high:g} deg")

    def _check_zero(self, reading: StageReading) -> None:
        if not reading.homed:
            raise DeviceRefused("stage", "not-homed", "its zero is not known")

    def _ask(self, name: str, **fields: object) -> Answer:
        return self._line.ask(name, timeout_s=self._timeout_s, **fields)
