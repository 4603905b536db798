"""Is the honest precision reached? Fits in a thread of its own, at every repeat. Acts.

What decides must not depend on how busy the machine is: the fit of the repeats up to
one is looked at when the *next* one is over, for which a whole repeat was time. So
nothing waits, and a resumed run decides the same. Whether it will be reached by the end
is foretold elsewhere (``live_judge``).
"""

import bisect
import threading
from collections.abc import Callable, Sequence
from contextlib import suppress

from pitchsweep.acquire.fit_input import FitInput
from pitchsweep.acquire.measured_state import measure
from pitchsweep.analysis.analysis_errors import AnalysisError
from pitchsweep.analysis.records import PitchResult


class PrecisionWatch:
    """``enough`` is the relative standard uncertainty of the pitch that suffices."""

    def __init__(
        self,
        enough: float,
        blocks: Sequence[int],
        read: Callable[[int], FitInput],
        say: Callable[[str], None],
    ) -> None:
        """``blocks``: first step of every repeat in every mount, rising, and the end.

        ``read(step)`` gives the spots of all steps before ``step``.
        """
        self._enough = enough
        self._blocks = list(blocks)
        self._read = read
        self._say = say
        self._fits: dict[int, tuple[threading.Thread, list[PitchResult]]] = {}

    def before_step(self, step: int) -> str:
        """Why the sweep may end before ``step``; empty to go on.

        Every step before the repeat of ``step`` must have been kept.
        """
        block = bisect.bisect_right(self._blocks, step) - 1
        if step != self._blocks[block]:
            self._begin(block)
            return ""
        reason = self._judge(block - 1) if block >= 2 else ""
        self._begin(block)
        return reason

    def _begin(self, block: int) -> None:
        """Begins the fit of everything before ``block``, once."""
        if block < 1 or block in self._fits:
            return
        given, found = self._read(self._blocks[block]), list[PitchResult]()
        thread = threading.Thread(
            target=_fit, args=(given, found), name="precision", daemon=True
        )
        self._fits = {k: v for k, v in self._fits.items() if k == block - 1}
        self._fits[block] = (thread, found)
        thread.start()

    def _judge(self, block: int) -> str:
        self._begin(block)
        thread, found = self._fits[block]
        thread.join()
        if not found:
            return ""
        result = found[0]
        relative = result.u_pitch_nm / result.pitch_nm
        self._say(f"so far {result.pitch_nm:.4f} nm, relative u {relative:.1e}")
        if relative <= self._enough:
            return f"the pitch is known to {relative:.1e}, {self._enough:.1e} is enough"
        return ""


def _fit(given: FitInput, found: list[PitchResult]) -> None:
    # Too few spots for a fit yet: there is simply no figure.
    with suppress(AnalysisError, ValueError):
        found.append(measure(given))
