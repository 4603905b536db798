"""When an acknowledgement in the ledger still counts."""

import pytest

from pitchsweep.safety.ack_record import run_entries, why_not_acknowledged_yet
from pitchsweep.safety.ledger_chain import Entry, entry_line, next_entry

UTC = "2026-03-01T12:00:00.000Z"
AT_S = 1772366400.0
"""The same moment, from ``date -u -d '2026-03-01 12:00' +%s``."""


def history(*events: str, run: str = "run-1") -> list[bytes]:
    lines, last = [], None
    for event in events:
        last = next_entry(last, kind="gate", data={"run": run, "event": event}, utc=UTC)
        lines.append(entry_line(last))
    return lines


def entries(*events: str) -> list[Entry]:
    return run_entries(history(*events), "run-1")


def why(*events: str, later_s: float = 10.0, booted_s: float = 0.0) -> str | None:
    return why_not_acknowledged_yet(
        entries(*events), now_utc_s=AT_S + later_s, booted_utc_s=booted_s
    )


def test_an_acknowledgement_followed_by_the_end_only_counts() -> None:
    assert why("armed", "hand-stop", "acknowledged", "end-requested") is None


@pytest.mark.parametrize(
    "events",
    [
        (),
        ("armed",),
        ("armed", "end-requested"),
        ("acknowledged", "armed"),
        ("acknowledged", "end-requested", "resumed"),
        ("acknowledged", "unit-silent", "end-requested"),
    ],
)
def test_anything_else_after_it_uses_it_up(events: tuple[str, ...]) -> None:
    assert "nobody" in str(why(*events))


def test_it_counts_for_an_hour_and_not_across_a_reboot() -> None:
    assert why("acknowledged", later_s=3599.0) is None
    assert "hour" in str(why("acknowledged", later_s=3601.0))
    assert "hour" in str(why("acknowledged", later_s=-1.0))
    assert "anew" in str(why("acknowledged", booted_s=AT_S + 1.0))


def test_other_runs_and_broken_lines_do_not_count() -> None:
    assert run_entries(history("acknowledged", run="run-2"), "run-1") == []
    assert run_entries([b"{}\n", b"broken\n"], "run-1") == []
