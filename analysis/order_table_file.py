"""Order tables as CSV text: reading with refusals that say where, writing exactly.

Rules of the file: a header names the columns (any order); ``#`` starts a comment line;
fields are separated by commas and numbers use a decimal point. ``order``,
``mount_deg``, ``ux_mm`` and ``uy_mm`` may be blank or absent, ``laser`` only where one
laser is known. ``face_deg`` (0 or 180, the turn in the part's own plane) may be there
too. ``brightness`` is there for every row or for none. The covariance of x and y is not
in the file: it reads as zero.
"""

import csv
import io
import re
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from typing import TypeVar

import numpy as np

from pitchsweep.analysis.analysis_errors import InputRefused
from pitchsweep.analysis.order_table_cells import (
    Field,
    angle_of,
    brightness_of,
    face_of,
    order_of,
    place_of,
    step_of,
    uncertainty_of,
)
from pitchsweep.analysis.records import UNKNOWN_ORDER, FloatArray, OrderTable

COLUMNS = (
    "step",
    "stage_deg",
    "mount_deg",
    "laser",
    "order",
    "x_mm",
    "y_mm",
    "ux_mm",
    "uy_mm",
)
BRIGHTNESS = "brightness"
FACE = "face_deg"
"""A further column, written only where a part was turned in its own plane."""
KNOWN = (*COLUMNS, BRIGHTNESS, FACE)
REQUIRED = ("step", "stage_deg", "x_mm", "y_mm")

_T = TypeVar("_T")


@dataclass(frozen=True)
class TableSource:
    """What a table is read with.

    ``file`` is the name to show in refusals, ``laser_names`` the lasers that the
    bench knows, ``reading_u_mm`` the standard uncertainty where the table has none.
    """

    file: str
    laser_names: tuple[str, ...]
    reading_u_mm: float


def decode_order_table(raw: bytes, file: str) -> str:
    """``raw`` bytes of a CSV file as text (UTF-8, with or without a byte-order mark).

    Raises InputRefused for any other encoding.
    """
    try:
        return raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise InputRefused(
            f"not UTF-8 text (byte {error.start + 1})",
            allowed="a CSV file saved as UTF-8; spreadsheets call it 'CSV UTF-8'",
            file=file,
        ) from error


def read_order_table(text: str, source: TableSource) -> OrderTable:
    """The order table that ``text`` (a whole CSV file) holds, rows in file order.

    Orders that are not given are UNKNOWN_ORDER, mounts 0, uncertainties
    ``source.reading_u_mm``. ``laser`` indexes ``source.laser_names``. Repeated rows
    are kept as they are.

    Raises InputRefused with file, line, column, value and what is allowed.
    """
    rows = list(_rows(text.removeprefix("\ufeff"), source.file))
    if not rows:
        raise InputRefused(
            "the table is blank",
            allowed=f"a header line ({','.join(COLUMNS)}) and at least one row",
            file=source.file,
        )
    header = _checked_header(rows[0][1], rows[0][0], source)
    cells = [_cells(fields, line, header, source.file) for line, fields in rows[1:]]
    if not cells:
        raise InputRefused(
            "the table has a header and no rows",
            allowed="at least one row below the header",
            file=source.file,
        )
    return _table(cells, source)


def write_order_table(table: OrderTable, *, comments: Sequence[str] = ()) -> str:
    """``table`` as CSV text that reads back to the same bits (x-y covariance apart).

    ``comments`` become ``#`` lines above the header.
    """
    out = io.StringIO()
    for comment in comments:
        out.write("".join(f"# {line}\n" for line in comment.splitlines()))
    writer = csv.writer(out, lineterminator="\n")
    names = [*COLUMNS]
    columns: list[Iterable[object]] = [
        table.step.tolist(),
        map(repr, table.stage_deg.tolist()),
        map(repr, table.mount_deg.tolist()),
        [table.laser_names[index] for index in table.laser.tolist()],
        ["" if m == UNKNOWN_ORDER else m for m in table.order.tolist()],
        map(repr, table.x_mm.tolist()),
        map(repr, table.y_mm.tolist()),
        map(repr, table.ux_mm.tolist()),
        map(repr, table.uy_mm.tolist()),
    ]
    if table.brightness is not None:
        names.append(BRIGHTNESS)
        columns.append(map(repr, table.brightness.tolist()))
    if table.face_deg is not None and table.face_deg.any():
        names.append(FACE)
        columns.append(map(repr, table.face_deg.tolist()))
    writer.writerow(names)
    writer.writerows(zip(*columns, strict=True))
    return out.getvalue()


def _rows(text: str, file: str) -> Iterable[tuple[int, list[str]]]:
    """Line number and fields of every line that is neither blank nor a comment."""
    for number, line in enumerate(re.split(r"\r\n|\n|\r", text), start=1):
        if not line.strip() or line.lstrip().startswith("#"):
            continue
        try:
            fields = next(csv.reader([line], strict=True))
        except csv.Error as error:
            raise InputRefused(
                f"the line cannot be split into fields ({error})",
                allowed="fields separated by commas, quotes closed on the same line",
                file=file,
                line=number,
            ) from error
        fields = [field.strip() for field in fields]
        if any(fields):  # spreadsheets leave rows of nothing but commas
            yield number, fields


def _checked_header(names: list[str], line: int, source: TableSource) -> list[str]:
    _check_separator(names, line, source.file)
    for name in names:
        if name not in KNOWN:
            raise InputRefused(
                "unknown column" if name else "a column has no name",
                allowed=f"the columns {', '.join(KNOWN)}",
                file=source.file,
                line=line,
                value=name,
            )
        if names.count(name) > 1:
            raise InputRefused(
                "the column is there twice",
                allowed="each column once",
                file=source.file,
                line=line,
                column=name,
            )
    needed = REQUIRED if len(source.laser_names) == 1 else (*REQUIRED, "laser")
    missing = [name for name in needed if name not in names]
    if missing:
        raise InputRefused(
            f"the header lacks {', '.join(missing)}",
            allowed=f"a first line that names {', '.join(needed)} (all: "
            f"{','.join(COLUMNS)})",
            file=source.file,
            line=line,
        )
    return names


def _check_separator(names: list[str], line: int, file: str) -> None:
    for mark, word in ((";", "semicolons"), ("\t", "tabs")):
        if len(names) == 1 and mark in names[0]:
            raise InputRefused(
                f"the fields are separated by {word}",
                allowed="commas between fields and decimal points in numbers; "
                "save the table again as comma-separated CSV with an English locale",
                file=file,
                line=line,
            )


def _cells(
    fields: list[str], line: int, header: list[str], file: str
) -> dict[str, Field]:
    if len(fields) != len(header):
        hint = "; decimal commas?" if len(fields) > len(header) else ""
        raise InputRefused(
            f"the row has {len(fields)} fields, the header {len(header)}{hint}",
            allowed="one field for each column, decimal points in numbers",
            file=file,
            line=line,
        )
    return {
        name: Field(text, name, line, file)
        for name, text in zip(header, fields, strict=True)
    }


def _table(cells: list[dict[str, Field]], source: TableSource) -> OrderTable:
    def column(name: str, read: Callable[[Field], _T], blank: _T) -> list[_T]:
        values = (row.get(name) for row in cells)
        return [read(v) if v is not None and v.text else blank for v in values]

    def needed(name: str, read: Callable[[Field], _T]) -> list[_T]:
        return [read(row[name]) for row in cells]

    u_mm = float(source.reading_u_mm)
    faces = np.array(column(FACE, face_of, 0.0), dtype=np.float64)
    return OrderTable(
        step=np.array(needed("step", step_of), dtype=np.int64),
        stage_deg=np.array(needed("stage_deg", angle_of), dtype=np.float64),
        mount_deg=np.array(column("mount_deg", angle_of, 0.0), dtype=np.float64),
        laser=np.array([_laser(row, source) for row in cells], dtype=np.int64),
        laser_names=source.laser_names,
        order=np.array(column("order", order_of, UNKNOWN_ORDER), dtype=np.int64),
        x_mm=np.array(needed("x_mm", place_of), dtype=np.float64),
        y_mm=np.array(needed("y_mm", place_of), dtype=np.float64),
        ux_mm=np.array(column("ux_mm", uncertainty_of, u_mm), dtype=np.float64),
        uy_mm=np.array(column("uy_mm", uncertainty_of, u_mm), dtype=np.float64),
        cxy_mm2=np.zeros(len(cells)),
        brightness=_brightness(cells),
        face_deg=faces if faces.any() else None,
    )


def _brightness(cells: list[dict[str, Field]]) -> FloatArray | None:
    """The column of brightness; None where it is absent or all blank."""
    if not any(row[BRIGHTNESS].text for row in cells if BRIGHTNESS in row):
        return None
    return np.array([brightness_of(row[BRIGHTNESS]) for row in cells], dtype=np.float64)


def _laser(row: dict[str, Field], source: TableSource) -> int:
    field = row.get("laser")
    known = source.laser_names
    if field is None or not field.text:
        if len(known) == 1:
            return 0
        assert field is not None  # the header check needs the column here
        raise field.refused("blank", f"one of the bench's lasers: {', '.join(known)}")
    if field.text not in known:
        raise field.refused("unknown laser", f"one of {', '.join(known)}")
    return known.index(field.text)
