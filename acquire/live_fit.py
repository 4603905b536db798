"""The fit of what a sweep has so far, ten times a sweep. Acts (a process, a thread).

What follows from it must not depend on how busy the machine is: the fit of the steps
before a look is asked for a few steps later, when all of them are surely kept, and
looked at when the next look is due. A resumed run looks at the same places. The fits
are made by one process beside the sweep, see ``live_worker``.
"""

import json
import queue
import subprocess
import sys
import threading
from collections.abc import Sequence
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Self

from pitchsweep.analysis.records import JumpSeen

WORKER = (sys.executable, "-m", "pitchsweep.acquire.live_worker")
LONGEST_S = 120.0
"""A fit that takes longer is not waited for any more."""
LOOKS = 10
FEWEST_STEPS = 16
SURELY_KEPT = 8
"""So many steps later a step has passed every queue."""
SURE_GAIN = 25.0
"""Fall of chi-squared from which a jump is told while sweeping: five times its u."""
ALIKE_STEPS = 12
"""A jump this near to one that was told already is the same, seen better."""
FOREWARNING = ("the spots move as if", "the spots fit only if")
"""How warnings of the fit begin that somebody at the bench can do something about."""


@dataclass(frozen=True)
class LiveNews:
    """What a look at the steps before ``steps`` shows that was not told before."""

    steps: int
    pitch_nm: float
    u_pitch_nm: float
    jumps: tuple[JumpSeen, ...] = ()
    warnings: tuple[str, ...] = ()
    part: str = ""


class LiveFit:
    """Asks for fits of a run; ask ``before_step`` before every step.

    Use it in a ``with`` block, which ends the process.
    """

    def __init__(self, run: Path, steps: int, told_jumps: Sequence[int] = ()) -> None:
        """``told_jumps``: steps of jumps that an earlier session told of."""
        self._every = max(FEWEST_STEPS, -(-steps // LOOKS))
        self._steps = steps
        self._run = run
        self._told = list(told_jumps)
        self._warned: set[str] = set()
        self._worker: subprocess.Popen[str] | None = None
        self._answers: queue.SimpleQueue[str] = queue.SimpleQueue()
        self._asked: int | None = None

    def __enter__(self) -> Self:
        if self._steps > 2 * self._every:
            self._worker = subprocess.Popen(
                [*WORKER, str(self._run)],
                stdin=subprocess.PIPE,
                stdout=subprocess.PIPE,
                stderr=subprocess.DEVNULL,
                text=True,
            )
            threading.Thread(target=self._listen, name="live fit", daemon=True).start()
        return self

    def __exit__(self, *_: object) -> None:
        if self._worker is None:
            return
        self._worker.kill()
        self._worker.wait()
        for pipe in (self._worker.stdin, self._worker.stdout):
            with suppress(OSError):
                if pipe is not None:
                    pipe.close()

    def before_step(self, step: int) -> LiveNews | None:
        """News that is due before ``step``; waits for its fit if that still runs."""
        if self._worker is None or step <= self._every:
            return None
        if step % self._every == 0:
            return self._news(step - self._every)
        if step % self._every == SURELY_KEPT:
            self._ask(step - SURELY_KEPT)
        return None

    def _listen(self) -> None:
        assert self._worker is not None and self._worker.stdout is not None
        with suppress(OSError, ValueError):
            for line in self._worker.stdout:
                self._answers.put(line)
        self._answers.put("")

    def _ask(self, look: int) -> None:
        if self._asked == look or self._worker is None:
            return
        assert self._worker.stdin is not None
        self._asked = look
        with suppress(OSError):
            self._worker.stdin.write(f"{look}\n")
            self._worker.stdin.flush()

    def _news(self, look: int) -> LiveNews | None:
        self._ask(look)
        answer = self._answer()
        if answer is None:
            return None
        jumps = tuple(
            jump for jump in (JumpSeen(**j) for j in answer["jumps"]) if self._new(jump)
        )
        self._told += [jump.step for jump in jumps]
        warnings = tuple(w for w in answer["warnings"] if self._is_worth(w))
        return LiveNews(
            look,
            answer["pitch_nm"],
            answer["u_pitch_nm"],
            jumps,
            warnings,
            answer.get("part", ""),
        )

    def _answer(self) -> dict[str, Any] | None:
        try:
            line = self._answers.get(timeout=LONGEST_S)
        except queue.Empty:
            line = ""
        if not line:  # it died or hangs: the sweep does without
            self.__exit__()
            self._worker = None
            return None
        found: dict[str, Any] | None = json.loads(line)
        return found

    def _new(self, jump: JumpSeen) -> bool:
        near = any(abs(jump.step - step) <= ALIKE_STEPS for step in self._told)
        return jump.gain >= SURE_GAIN and not near

    def _is_worth(self, warning: str) -> bool:
        kind = next((f for f in FOREWARNING if f in warning), None)
        if kind is None or kind in self._warned:
            return False
        self._warned.add(kind)
        return True
