"""The turning part of the simulated stage, as functions of bench time (pure).

``motor_deg`` is the mechanical position of the motor side; the reading is the motor
side less what the stage is wrong about while its zero is lost. The table side lags
behind by the backlash after turning downwards: table = motor + slack, slack between
0 (last turned upwards) and ``backlash_deg`` (last turned downwards). A part of it is
wound up in what turns the table and unwinds only over a run-up in the other direction.
"""

from dataclasses import dataclass
from math import exp
from typing import Any

RESOLUTION_DEG = 1e-4
SEEK_EXTRA_S = 2.0


@dataclass(frozen=True)
class Rest:
    """What is kept of a stage at rest; comes back at the next start."""

    motor_deg: float
    slack_deg: float
    homed: bool
    wrong_by_deg: float
    run_up_deg: float = 0.0


@dataclass(frozen=True)
class Windup:
    """How much of the backlash stays wound up, and over what run-up it unwinds."""

    size_deg: float = 0.0
    run_up_deg: float = 1.0


class StageMechanics:
    """One rotation stage; every method takes the bench time at which it happens."""

    def __init__(
        self, rest: Rest, *, backlash_deg: float, windup: Windup = Windup()
    ) -> None:
        self._backlash_deg = backlash_deg
        self._windup = windup
        self._run_up_deg = rest.run_up_deg
        self._slack_deg = rest.slack_deg
        self._start_deg = rest.motor_deg
        self._target_deg = rest.motor_deg
        self._started_s = 0.0
        self._ends_s = 0.0
        self._homed = rest.homed
        self._seeking = False
        self._wrong_by_deg = rest.wrong_by_deg
        self.stalled = False

    def motor_deg(self, now_s: float) -> float:
        """The mechanical position of the motor side."""
        if now_s >= self._ends_s:
            return self._target_deg
        share = (now_s - self._started_s) / (self._ends_s - self._started_s)
        return self._start_deg + share * (self._target_deg - self._start_deg)

    def reading_deg(self, now_s: float) -> float:
        """What the stage shows, to its resolution."""
        shown = self.motor_deg(now_s) - self._wrong_by(now_s)
        return round(shown / RESOLUTION_DEG) * RESOLUTION_DEG

    def table_deg(self, now_s: float) -> float:
        """Where the part stands: the motor side plus the slack of the backlash."""
        motor_deg = self.motor_deg(now_s)
        wound = 1.0
        if self._run_up_at(motor_deg) > 0.0:
            wound = exp(-self._run_up_at(motor_deg) / self._windup.run_up_deg)
        return motor_deg + self._slack_at(motor_deg) + self._windup.size_deg * wound

    def turning(self, now_s: float) -> bool:
        """Whether it turns."""
        return now_s < self._ends_s

    def homed(self, now_s: float) -> bool:
        """Whether it knows its zero; a running search ends by knowing it."""
        return self._homed or (self._seeking and now_s >= self._ends_s)

    def move(self, target_deg: float, speed_deg_per_s: float, now_s: float) -> None:
        """Sets off to ``target_deg`` (motor side) from wherever it is."""
        here_deg = self._arrive(now_s)
        self._depart(here_deg, target_deg, speed_deg_per_s, now_s, 0.0)

    def seek_zero(self, speed_deg_per_s: float, now_s: float) -> None:
        """Sets off to the zero mark; the zero is known on arrival."""
        here_deg = self._arrive(now_s)
        self._homed = False
        self._seeking = True
        self._depart(here_deg, 0.0, speed_deg_per_s, now_s, SEEK_EXTRA_S)

    def halt(self, now_s: float) -> None:
        """Stops where it is; a search for zero that is cut short finds nothing."""
        here_deg = self._arrive(now_s)
        self._seeking = False
        self._depart(here_deg, here_deg, 1.0, now_s, 0.0)

    def lose_zero(self, now_s: float, wrong_by_deg: float) -> None:
        """Forgets the zero: from now on readings are wrong by ``wrong_by_deg``."""
        self.halt(now_s)
        self._homed = False
        self._wrong_by_deg = wrong_by_deg

    def rest(self, now_s: float) -> Rest:
        """The state as it would be kept now."""
        motor_deg = self.motor_deg(now_s)
        homed = self.homed(now_s)
        wrong = 0.0 if homed else self._wrong_by_deg
        run_up_deg = self._run_up_at(motor_deg)
        return Rest(motor_deg, self._slack_at(motor_deg), homed, wrong, run_up_deg)

    def _arrive(self, now_s: float) -> float:
        kept = self.rest(now_s)
        self._slack_deg = kept.slack_deg
        self._run_up_deg = kept.run_up_deg
        self._homed = kept.homed
        self._wrong_by_deg = kept.wrong_by_deg
        self._seeking = self._seeking and now_s < self._ends_s
        return kept.motor_deg

    def _depart(
        self, here: float, target: float, speed: float, now_s: float, extra_s: float
    ) -> None:
        self._start_deg = here
        self._target_deg = target
        self._started_s = now_s
        self._ends_s = now_s + abs(target - here) / speed + extra_s
        self.stalled = False

    def _slack_at(self, motor_deg: float) -> float:
        table_deg = self._start_deg + self._slack_deg
        lowest, highest = motor_deg, motor_deg + self._backlash_deg
        return min(max(table_deg, lowest), highest) - motor_deg

    def _run_up_at(self, motor_deg: float) -> float:
        """How far it has turned the same way, upwards positive."""
        turned_deg = motor_deg - self._start_deg
        onwards = turned_deg * self._run_up_deg >= 0.0
        return turned_deg + (self._run_up_deg if onwards else 0.0)

    def _wrong_by(self, now_s: float) -> float:
        return 0.0 if self.homed(now_s) else self._wrong_by_deg


def rest_to_json(rest: Rest) -> dict[str, Any]:
    """Plain values, for ``rest_from_json``."""
    return dict(rest.__dict__)


def rest_from_json(values: dict[str, Any]) -> Rest:
    """The kept state that ``values`` describes."""
    return Rest(**values)
