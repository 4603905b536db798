"""What the guard knows of its unit, taken in with every answer (acts on the unit).

Keeps the last reading, what shows a person at the bench after a trip, what has been
proven before arming, and since when two interlock channels contradict each other.
"""

from collections.abc import Callable
from dataclasses import replace

from pitchsweep.drivers.emission_client import UnitState
from pitchsweep.safety.ack_evidence import Evidence, observe
from pitchsweep.safety.arming_proof import ArmingProof, observe_proof, trial_begun
from pitchsweep.safety.guard_view import UnitReading
from pitchsweep.safety.guard_world import UnitLine


class UnitWatch:
    """Asks the unit; ``now`` is in monotonic seconds. DriverError passes through."""

    def __init__(self, unit: UnitLine, now: Callable[[], float]) -> None:
        self.reading: UnitReading | None = None
        self.evidence = Evidence()
        self.proof = ArmingProof()
        self.disagree_since_s: float | None = None
        self.kept_s = float("-inf")
        self._unit = unit
        self._now = now

    def look(self) -> None:
        """Asks how the unit stands."""
        self._took(self._now(), self._unit.state())

    def light_up(self) -> None:
        """Asks for light, right after a look."""
        asked_s = self._now()
        self._took(asked_s, self._unit.light_up())
        self.kept_s = asked_s

    def keep(self) -> None:
        """Holds the light."""
        asked_s = self._now()
        self._took(asked_s, self._unit.keep_lit())
        self.kept_s = asked_s

    def begin_trial(self) -> None:
        """Lets the keep-alive time run out once with the shutter held shut."""
        self._unit.ready_trial()
        asked_s = self._now()
        says = self._unit.try_time_out()
        self.proof = trial_begun(
            self.proof, asked_s=asked_s, answered_s=self._now(), says=says
        )
        self._took(asked_s, says)

    def darken(self) -> None:
        """Asks for dark; without an answer the unit's own keep-alive ends the light."""
        asked_s = self._now()
        try:
            self._took(asked_s, self._unit.dark())
        except Exception:
            # Whatever failed, the state must still move to dark; the next look at the
            # unit names what is wrong with it.
            self.reading = None

    def begin_trip(self) -> None:
        """What was shown before counts no more; a person has to come."""
        says = None if self.reading is None else self.reading.says
        self.evidence = Evidence() if says is None else observe(Evidence(), says)
        self.forget_proof()

    def forget_proof(self) -> None:
        """What was shown counts for one arming only."""
        self.proof = ArmingProof()

    def demand_cycle(self) -> None:
        """Only an open-close cycle of every channel will do after this."""
        self.evidence = replace(
            self.evidence, must_cycle=True, was_opened=False, was_cycled=False
        )

    def shows_light(self) -> bool:
        """Whether the unit said so in its last answer."""
        return self.reading is not None and self.reading.says.light_on

    def _took(self, asked_s: float, says: UnitState) -> None:
        self.reading = UnitReading(asked_s, says)
        self.evidence = observe(self.evidence, says)
        self.proof = observe_proof(
            self.proof, asked_s=asked_s, answered_s=self._now(), says=says
        )
        if says.channels_agree:
            self.disagree_since_s = None
        elif self.disagree_since_s is None:
            self.disagree_since_s = asked_s
