"""The door sheet: one page for whoever stands in front of the door at night. Pure."""

from datetime import datetime, tzinfo

from jinja2 import Environment, PackageLoader, StrictUndefined, select_autoescape

from pitchsweep.safety.exposure_limits import UNATTENDED_S
from pitchsweep.safety.safety_errors import CAUTION
from pitchsweep.safety.sign_off import SignOff, Statement, utc_seconds

TEMPLATE = "door_sheet.html"
LETTERS_A_LINE = 60.0
SIZES_PT = ((7.0, 11.0), (15.0, 9.5), (float("inf"), 8.0))
"""(lines that vary, size of the writing), from large to small."""
CAUTION_SENTENCE = CAUTION[:1].upper() + CAUTION[1:] + "."


def door_sheet(record: SignOff, here: tzinfo | None = None) -> str:
    """The page as HTML that needs nothing but itself; one A4 page in print.

    ``here``: the zone for times of the place besides UTC (default: the computer's).
    """
    statement = record.statement
    values = {
        "s": statement,
        "entered": record.entered,
        "begins": _short(statement.valid_from),
        "ends": _short(statement.valid_until),
        "begins_here": _local(statement.valid_from, here),
        "ends_here": _local(statement.valid_until, here),
        "made": _short(statement.made),
        "long_look": f"{UNATTENDED_S:g} s",
        "together_mw": _together_mw(statement),
        "caution": CAUTION_SENTENCE,
        "size_pt": _size_pt(statement),
    }
    environment = Environment(
        loader=PackageLoader("pitchsweep.safety"),
        autoescape=select_autoescape(),
        undefined=StrictUndefined,
        trim_blocks=True,
    )
    return environment.get_template(TEMPLATE).render(values)


def _size_pt(statement: Statement) -> float:
    """As large as one page allows: what varies is the lasers and the words given."""
    lines = 1.5 * len(statement.lasers)
    lines += sum(len(words) / LETTERS_A_LINE for words in statement.contacts.values())
    return next(size for most, size in SIZES_PT if lines <= most)


def _together_mw(statement: Statement) -> float | None:
    """Full drive of all lasers that may be alight together; None where none may."""
    if not any(laser["together"] for laser in statement.lasers):
        return None
    return sum(float(str(laser["power_mw"])) for laser in statement.lasers)


def _short(utc: str) -> str:
    return utc[:16].replace("T", " ")


def _local(utc: str, here: tzinfo | None) -> str:
    when = datetime.fromtimestamp(utc_seconds(utc)).astimezone(here)
    return when.strftime("%a %d %b, %H:%M")
