"""What the ledger says of a run's trips: acknowledged and not used up, or not. Pure.

An acknowledgement counts for the next guard of the run only, for an hour at most and
not across a reboot: each of these is a trip of its own.
"""

from collections.abc import Iterable, Mapping
from datetime import datetime

from pitchsweep.safety.ledger_chain import Entry, read_entry

LONGEST_S = 3600.0


def run_entries(lines: Iterable[bytes], run: str) -> list[Entry]:
    """The whole entries of ``run`` in a ledger's lines; broken lines are left out."""
    found = []
    for line in lines:
        try:
            entry = read_entry(line.rstrip(b"\n"))
        except ValueError:
            continue
        if entry.data.get("run") == run:
            found.append(entry)
    return found


def why_not_acknowledged_yet(
    entries: Iterable[Entry], *, now_utc_s: float, booted_utc_s: float
) -> str | None:
    """None when the run's last trip is acknowledged for the next guard.

    ``entries`` are those of the run, oldest first.
    """
    last = _last_that_counts(entries)
    if last is None or last.data.get("event") != "acknowledged":
        return "nobody has acknowledged the run's end or trip at the bench"
    at_s = datetime.fromisoformat(last.utc).timestamp()
    if at_s < booted_utc_s:
        return "the computer was started anew since the trip was acknowledged"
    if not 0.0 <= now_utc_s - at_s <= LONGEST_S:
        return "the trip was acknowledged more than an hour ago (or the clock was set)"
    return None


def _last_that_counts(entries: Iterable[Entry]) -> Entry | None:
    counting = [entry for entry in entries if not _says_nothing_new(entry.data)]
    return counting[-1] if counting else None


def _says_nothing_new(data: Mapping[str, object]) -> bool:
    return data.get("event") == "end-requested" or "light_s" in data
