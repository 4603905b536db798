"""Whether a run's last end or trip was acknowledged at the bench. Acts (disk)."""

import time
from pathlib import Path

from pitchsweep.safety.ack_record import run_entries, why_not_acknowledged_yet


def why_run_is_not_acknowledged(ledger: Path, run: str) -> str | None:
    """None when the next guard of ``run`` may begin untripped, otherwise the reason."""
    try:
        with ledger.open("rb") as lines:
            entries = run_entries(lines, run)
    except OSError as error:
        return f"the ledger cannot be read: {error.strerror}"
    return why_not_acknowledged_yet(
        entries, now_utc_s=time.time(), booted_utc_s=booted_utc_s()
    )


def booted_utc_s() -> float:
    """When this computer was started; now, where the system does not say."""
    if not hasattr(time, "CLOCK_BOOTTIME"):
        return time.time()
    return time.time() - time.clock_gettime(time.CLOCK_BOOTTIME)
