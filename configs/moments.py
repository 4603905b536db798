"""Days and moments as settings write them: a pattern, and a day that exists (pure)."""

import datetime
from typing import Annotated

from pydantic import AfterValidator, Field


def _a_day_that_exists(text: str) -> str:
    """``text`` as it is; ValueError for the 31st of February and its like."""
    try:
        datetime.date.fromisoformat(text[:10])
    except ValueError:
        raise ValueError(f"{text[:10]} is no day of the calendar") from None
    return text


def _a_moment_that_exists(text: str) -> str:
    return _a_day_that_exists(text) if "T" in text else text


Day = Annotated[
    str, Field(pattern=r"^\d{4}-\d{2}-\d{2}$"), AfterValidator(_a_day_that_exists)
]
"""``2026-01-31``."""

UtcMoment = Annotated[
    str,
    Field(pattern=r"^([0-9]{4}-[0-9]{2}-[0-9]{2}T)?([01][0-9]|2[0-3]):[0-5][0-9]Z$"),
    AfterValidator(_a_moment_that_exists),
]
"""``2026-01-31T18:00Z``, or ``18:00Z`` for the next time that it is so late; UTC."""
