"""When a sweep may begin and must end, and when a part is steady (pure).

Moments are UTC, so that daylight saving changes nothing; durations are bench time.
"""

from collections.abc import Sequence
from datetime import UTC, datetime, timedelta

EVERY_S = 300.0
"""Bench time between two readings while the part settles."""
WINDOW = 7
"""Readings over which the change of temperature is judged: half an hour."""


def seconds_until(moment: str, now: datetime) -> float:
    """Seconds from ``now`` (UTC) until ``moment`` of a schedule.

    Negative for a dated moment that has passed; a time of day is the next such time.
    """
    if "T" in moment:
        when = datetime.strptime(moment, "%Y-%m-%dT%H:%MZ").replace(tzinfo=UTC)
        return (when - now).total_seconds()
    hour, minute = (int(part) for part in moment.rstrip("Z").split(":"))
    when = now.replace(hour=hour, minute=minute, second=0, microsecond=0)
    if when < now:
        when += timedelta(days=1)
    return (when - now).total_seconds()


def slope_K_per_h(readings: Sequence[tuple[float, float]]) -> float | None:
    """Change of temperature from the last readings (seconds, deg C), straight line.

    None while there are fewer than ``WINDOW``.
    """
    last = readings[-WINDOW:]
    if len(last) < WINDOW:
        return None
    mean_s = sum(t for t, _ in last) / len(last)
    mean_C = sum(c for _, c in last) / len(last)
    spread = sum((t - mean_s) ** 2 for t, _ in last)
    along = sum((t - mean_s) * (c - mean_C) for t, c in last)
    return 3600.0 * along / spread


def is_steady(readings: Sequence[tuple[float, float]], limit_K_per_h: float) -> bool:
    """Whether the last half hour changes by less than ``limit_K_per_h``."""
    slope = slope_K_per_h(readings)
    return slope is not None and abs(slope) < limit_K_per_h


def days_until(due: str, now: datetime) -> int:
    """Whole days from ``now`` to a due date ``YYYY-MM-DD``; negative when overdue."""
    return (datetime.fromisoformat(due).date() - now.date()).days
