"""The cells of an order table: each with its place, read or refused."""

import math
import re
from dataclasses import dataclass

from pitchsweep.analysis.analysis_errors import InputRefused

MAX_STEP = 2**31 - 1
MAX_ORDER = 1000
MAX_ANGLE_DEG = 3600.0
MAX_MM = 1.0e5
MAX_BRIGHTNESS = 1.0e15

_WHOLE = re.compile(r"[+-]?[0-9]{1,10}")
_NUMBER = re.compile(r"[+-]?([0-9]+\.?[0-9]*|\.[0-9]+)([eE][+-]?[0-9]+)?")
_DECIMAL_COMMA = re.compile(r"[+-]?[0-9]+,[0-9]+([eE][+-]?[0-9]+)?")


@dataclass(frozen=True)
class Field:
    """One cell with its place."""

    text: str
    column: str
    line: int
    file: str

    def refused(self, problem: str, allowed: str) -> InputRefused:
        return InputRefused(
            problem,
            allowed=allowed,
            file=self.file,
            line=self.line,
            column=self.column,
            value=self.text,
        )


def step_of(field: Field) -> int:
    """The step number of a cell. Raises InputRefused."""
    return _whole(field, 0, MAX_STEP)


def order_of(field: Field) -> int:
    """The order of a cell. Raises InputRefused."""
    return _whole(field, -MAX_ORDER, MAX_ORDER)


def brightness_of(field: Field) -> float:
    """The brightness of a cell, in any one unit. Raises InputRefused."""
    return _number(field, 0.0, MAX_BRIGHTNESS, "any one unit")


def _whole(field: Field, low: int, high: int) -> int:
    allowed = f"a whole number from {low} to {high}"
    if not _WHOLE.fullmatch(field.text):
        raise field.refused("not a whole number" if field.text else "blank", allowed)
    number = int(field.text)
    if not low <= number <= high:
        raise field.refused("out of range", allowed)
    return number


def angle_of(field: Field) -> float:
    """The angle of a cell, degrees. Raises InputRefused."""
    return _number(field, -MAX_ANGLE_DEG, MAX_ANGLE_DEG, "degrees")


def face_of(field: Field) -> float:
    """The turn of a cell in the part's own plane, degrees. Raises InputRefused."""
    number = angle_of(field)
    if number not in (0.0, 180.0):
        raise field.refused("no half turn", "0 or 180 degrees in the part's own plane")
    return number


def place_of(field: Field) -> float:
    """The place of a cell, mm. Raises InputRefused."""
    return _number(field, -MAX_MM, MAX_MM, "mm")


def uncertainty_of(field: Field) -> float:
    """The standard uncertainty of a cell, mm. Raises InputRefused."""
    number = _number(field, 0.0, MAX_MM, "mm")
    if number <= 0.0:
        raise field.refused(
            "an uncertainty must be above zero",
            f"a number of mm above 0 to {MAX_MM:g}, or blank for the bench's own",
        )
    return number


def _number(field: Field, low: float, high: float, unit: str) -> float:
    allowed = f"a finite number of {unit} from {low:g} to {high:g}"
    if not field.text:
        raise field.refused("blank", allowed)
    if _DECIMAL_COMMA.fullmatch(field.text):
        raise field.refused("decimal comma", f"{allowed}, with a decimal point")
    if not _NUMBER.fullmatch(field.text):
        raise field.refused("not a finite number", allowed)
    number = float(field.text)
    if not math.isfinite(number) or not low <= number <= high:
        raise field.refused("out of range", allowed)
    return number
