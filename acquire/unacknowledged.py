"""Refuses a run whose last end or trip nobody acknowledged. Acts (disk)."""

from pathlib import Path

from pitchsweep.configs.typed_command import typed
from pitchsweep.safety.run_ack import why_run_is_not_acknowledged
from pitchsweep.safety.safety_errors import GateRefused


def refuse_unacknowledged(ledger: Path, run: str, folder: Path) -> None:
    """Raises GateRefused for a run that has to be acknowledged before it goes on."""
    reason = why_run_is_not_acknowledged(ledger, run)
    if reason is not None:
        raise GateRefused(
            f"run {run}: {reason}", f"go to the bench, then: {typed('ack', folder)}"
        )
