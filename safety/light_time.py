"""How long each step was lit: one sum per step, not one line per exposure. Pure."""

from dataclasses import dataclass


@dataclass(frozen=True)
class StepLight:
    """The total light time of a step in seconds and the number of times it was lit."""

    step: int
    light_s: float
    times: int


class LightMeter:
    """Adds up light time; times are monotonic seconds."""

    def __init__(self) -> None:
        self._since_s: float | None = None
        self._step: int | None = None
        self._light_s = 0.0
        self._times = 0

    def lit(self, step: int, now_s: float) -> StepLight | None:
        """Begins light on ``step``; gives the sum of the step before, if it ended."""
        finished = self.close(now_s) if step != self._step else None
        self._step = step
        self._since_s = now_s
        self._times += 1
        return finished

    def dark(self, now_s: float) -> None:
        """Ends light; dark in the dark changes nothing."""
        if self._since_s is not None:
            self._light_s += max(0.0, now_s - self._since_s)
            self._since_s = None

    def close(self, now_s: float) -> StepLight | None:
        """The sum of the step in hand, which begins anew; None if it was never lit."""
        self.dark(now_s)
        if self._step is None or self._times == 0:
            return None
        total = StepLight(self._step, self._light_s, self._times)
        self._step, self._light_s, self._times = None, 0.0, 0
        return total
