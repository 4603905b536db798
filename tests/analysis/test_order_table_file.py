"""Order tables: exact round trip; refusals say file, line, column, value, allowed."""

import dataclasses

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from pitchsweep.analysis.analysis_errors import InputRefused
from pitchsweep.analysis.order_table_cells import (
    MAX_ANGLE_DEG,
    MAX_BRIGHTNESS,
    MAX_MM,
    MAX_ORDER,
    MAX_STEP,
)
from pitchsweep.analysis.order_table_file import (
    COLUMNS,
    TableSource,
    decode_order_table,
    read_order_table,
    write_order_table,
)
from pitchsweep.analysis.records import UNKNOWN_ORDER, OrderTable

ONE_LASER = TableSource("typed.csv", ("red",), 0.1)
TWO_LASERS = TableSource("typed.csv", ("red", "blue"), 0.1)
FULL = """\
# typed with a ruler
step,stage_deg,mount_deg,laser,order,x_mm,y_mm,ux_mm,uy_mm
0,-30.0,0,red,0,-433.0,0.5,0.1,0.2
1,10.5,180,red,-1,12.25,-0.5,0.3,0.4
"""

ANGLES = st.floats(-MAX_ANGLE_DEG, MAX_ANGLE_DEG)
PLACES = st.floats(-MAX_MM, MAX_MM)
ERRORS = st.floats(0.0, MAX_MM, exclude_min=True)
ORDERS = st.just(UNKNOWN_ORDER) | st.integers(-MAX_ORDER, MAX_ORDER)
ROWS = st.tuples(
    st.integers(0, MAX_STEP),
    ANGLES,
    ANGLES,
    st.integers(0, 1),
    ORDERS,
    PLACES,
    PLACES,
    ERRORS,
    ERRORS,
)


def table_of(rows: list[tuple[float, ...]], names: tuple[str, ...]) -> OrderTable:
    columns = list(zip(*rows, strict=True))

    def whole(index: int) -> np.ndarray[tuple[int], np.dtype[np.int64]]:
        return np.array(columns[index], dtype=np.int64)

    def real(index: int) -> np.ndarray[tuple[int], np.dtype[np.float64]]:
        return np.array(columns[index], dtype=np.float64)

    return OrderTable(
        step=whole(0),
        stage_deg=real(1),
        mount_deg=real(2),
        laser=whole(3),
        laser_names=names,
        order=whole(4),
        x_mm=real(5),
        y_mm=real(6),
        ux_mm=real(7),
        uy_mm=real(8),
        cxy_mm2=np.zeros(len(rows)),
    )


def assert_same_bits(one: OrderTable, other: OrderTable) -> None:
    for field in dataclasses.fields(OrderTable):
        here, there = getattr(one, field.name), getattr(other, field.name)
        if field.name == "laser_names" or here is None:
            assert here == there
        else:
            assert here.dtype == there.dtype
            assert here.tobytes() == there.tobytes(), field.name


@given(rows=st.lists(ROWS, min_size=1, max_size=20))
def test_written_tables_read_back_bit_for_bit(rows: list[tuple[float, ...]]) -> None:
    table = table_of(rows, TWO_LASERS.laser_names)
    text = write_order_table(table, comments=("invented data", "two\nlines"))
    assert_same_bits(read_order_table(text, TWO_LASERS), table)


@given(rows=st.lists(ROWS, min_size=1, max_size=5), light=st.data())
def test_brightness_reads_back_bit_for_bit(
    rows: list[tuple[float, ...]], light: st.DataObject
) -> None:
    lights = st.floats(0.0, MAX_BRIGHTNESS)
    values = light.draw(st.lists(lights, min_size=len(rows), max_size=len(rows)))
    plain = table_of(rows, TWO_LASERS.laser_names)
    table = dataclasses.replace(plain, brightness=np.array(values))
    assert_same_bits(read_order_table(write_order_table(table), TWO_LASERS), table)


def test_brightness_blank_in_every_row_is_not_known() -> None:
    text = "step,stage_deg,x_mm,y_mm,brightness\n0,1,2,3,\n1,2,3,4,\n"
    assert read_order_table(text, ONE_LASER).brightness is None


def test_brightness_blank_in_some_rows_is_refused() -> None:
    text = "step,stage_deg,x_mm,y_mm,brightness\n0,1,2,3,7\n1,2,3,4,\n"
    with pytest.raises(InputRefused, match="line 3, column brightness.*blank"):
        read_order_table(text, ONE_LASER)


@given(rows=st.lists(ROWS, min_size=1, max_size=5), order=st.permutations(range(9)))
def test_the_order_of_columns_does_not_matter(
    rows: list[tuple[float, ...]], order: list[int]
) -> None:
    table = table_of(rows, TWO_LASERS.laser_names)
    lines = write_order_table(table).splitlines()
    cells = [line.split(",") for line in lines]
    text = "\n".join(",".join(row[i] for i in order) for row in cells)
    assert_same_bits(read_order_table(text, TWO_LASERS), table)


def test_every_column_is_read() -> None:
    table = read_order_table(FULL, ONE_LASER)
    assert table.step.tolist() == [0, 1]
    assert table.stage_deg.tolist() == [-30.0, 10.5]
    assert table.mount_deg.tolist() == [0.0, 180.0]
    assert table.order.tolist() == [0, -1]
    assert table.x_mm.tolist() == [-433.0, 12.25]
    assert table.y_mm.tolist() == [0.5, -0.5]
    assert table.ux_mm.tolist() == [0.1, 0.3]
    assert table.uy_mm.tolist() == [0.2, 0.4]


def test_columns_that_may_be_absent_take_their_blank_values() -> None:
    table = read_order_table("step,stage_deg,x_mm,y_mm\n0,1.5,2,3\n", ONE_LASER)
    assert table.order.tolist() == [UNKNOWN_ORDER]
    assert table.mount_deg.tolist() == [0.0]
    assert table.laser.tolist() == [0]
    assert table.ux_mm.tolist() == table.uy_mm.tolist() == [0.1]


def test_columns_that_may_be_blank_take_their_blank_values() -> None:
    text = f"{','.join(COLUMNS)}\n0,1.5,,,,2,3,,0.5\n"
    table = read_order_table(text, ONE_LASER)
    assert table.order.tolist() == [UNKNOWN_ORDER]
    assert table.mount_deg.tolist() == [0.0]
    assert (table.ux_mm.tolist(), table.uy_mm.tolist()) == ([0.1], [0.5])


@pytest.mark.parametrize("ending", ["\n", "\r\n", "\r"])
@pytest.mark.parametrize("mark", ["", "\ufeff"])
def test_line_endings_and_byte_order_marks_are_accepted(ending: str, mark: str) -> None:
    raw = (mark + FULL.replace("\n", ending)).encode()
    table = read_order_table(decode_order_table(raw, "typed.csv"), ONE_LASER)
    assert_same_bits(table, read_order_table(FULL, ONE_LASER))
    assert_same_bits(read_order_table(mark + FULL, ONE_LASER), table)


def test_repeated_rows_are_kept() -> None:
    row = "0,1.5,2,3\n"
    table = read_order_table("step,stage_deg,x_mm,y_mm\n" + 3 * row, ONE_LASER)
    assert len(table) == 3


def test_comments_blank_lines_and_rows_of_commas_are_passed_over() -> None:
    text = "\n# a, b\nstep,stage_deg,x_mm,y_mm\n\n  # c\n0,1,2,3\n,,,\n"
    assert len(read_order_table(text, ONE_LASER)) == 1


@pytest.mark.parametrize(
    ("row", "line", "column", "value", "word"),
    [
        ("x,1,red,0,1,1,1", 2, "step", "x", "whole number"),
        ("1.5,1,red,0,1,1,1", 2, "step", "1.5", "whole number"),
        ("-1,1,red,0,1,1,1", 2, "step", "-1", "out of range"),
        ("1_0,1,red,0,1,1,1", 2, "step", "1_0", "whole number"),
        ("0,,red,0,1,1,1", 2, "stage_deg", "", "blank"),
        ("0,1e9,red,0,1,1,1", 2, "stage_deg", "1e9", "out of range"),
        ("0,1,green,0,1,1,1", 2, "laser", "green", "red, blue"),
        ("0,1,,0,1,1,1", 2, "laser", "", "red, blue"),
        ("0,1,red,1001,1,1,1", 2, "order", "1001", "out of range"),
        ("0,1,red,0,nan,1,1", 2, "x_mm", "nan", "finite"),
        ("0,1,red,0,1,inf,1", 2, "y_mm", "inf", "finite"),
        ("0,1,red,0,1e999,1,1", 2, "x_mm", "1e999", "out of range"),
        ('0,1,red,0,"12,5",1,1', 2, "x_mm", "12,5", "decimal comma"),
        ("0,1,red,0,1,1,0", 2, "ux_mm", "0", "above zero"),
        ("0,1,red,0,1,1,-0.1", 2, "ux_mm", "-0.1", "out of range"),
        ("0,1,red,0,\u0661,1,1", 2, "x_mm", "\u0661", "finite"),
    ],
)
def test_a_bad_cell_is_named(
    row: str, line: int, column: str, value: str, word: str
) -> None:
    text = f"step,stage_deg,laser,order,x_mm,y_mm,ux_mm\n{row}\n"
    with pytest.raises(InputRefused, match=word) as caught:
        read_order_table(text, TWO_LASERS)
    error = caught.value
    assert (error.file, error.line, error.column) == ("typed.csv", line, column)
    assert error.value == value
    assert f"typed.csv, line {line}, column {column}" in str(error)
    assert len(str(error).splitlines()) == 2


def test_line_numbers_count_comments_and_blank_lines() -> None:
    with pytest.raises(InputRefused) as caught:
        read_order_table("# a\n\nstep,stage_deg,x_mm,y_mm\n\n0,1,2,z\n", ONE_LASER)
    assert (caught.value.line, caught.value.column) == (5, "y_mm")


@pytest.mark.parametrize(
    ("text", "word"),
    [
        ("", "blank"),
        ("# only a comment\n", "blank"),
        ("step,stage_deg,x_mm,y_mm\n", "no rows"),
        ("step;stage_deg;x_mm;y_mm\n0;1,5;2,5;3\n", "semicolons"),
        ("step\tstage_deg\tx_mm\ty_mm\n0\t1\t2\t3\n", "tabs"),
        ("step,stage_deg,x_mm,y_mm\n0,1,5,2,5,3\n", "decimal commas"),
        ("step,stage_deg,x_mm,y_mm\n0,1,2\n", "3 fields"),
        ("step,stage_deg,x_mm,y_mm,colour\n0,1,2,3,4\n", "unknown column"),
        ("step,stage_deg,x_mm,y_mm,\n0,1,2,3,4\n", "no name"),
        ("step,step,stage_deg,x_mm,y_mm\n0,0,1,2,3\n", "twice"),
        ("step,x_mm,y_mm\n0,1,2\n", "lacks stage_deg"),
        ("0,1.5,2,3\n", "unknown column"),
        ('step,stage_deg,x_mm,y_mm\n0,1,"2,3\n', "cannot be split"),
    ],
)
def test_a_file_that_is_no_order_table_is_refused(text: str, word: str) -> None:
    with pytest.raises(InputRefused, match=word) as caught:
        read_order_table(text, ONE_LASER)
    assert caught.value.file == "typed.csv"
    assert "Allowed: " in str(caught.value)


def test_the_laser_column_is_needed_where_two_lasers_are_known() -> None:
    with pytest.raises(InputRefused, match="lacks laser"):
        read_order_table("step,stage_deg,x_mm,y_mm\n0,1,2,3\n", TWO_LASERS)


def test_other_encodings_are_refused() -> None:
    with pytest.raises(InputRefused, match="UTF-8"):
        decode_order_table(FULL.encode("utf-16"), "typed.csv")


@given(text=st.text(max_size=200))
def test_any_text_is_read_or_refused(text: str) -> None:
    try:
        read_order_table(text, ONE_LASER)
    except InputRefused as error:
        assert len(str(error).splitlines()) <= 2


@given(tail=st.text(alphabet='0123456789,.-eE"# ;\nnaif', max_size=80))
def test_any_row_is_read_or_refused(tail: str) -> None:
    try:
        table = read_order_table(f"step,stage_deg,x_mm,y_mm\n{tail}", ONE_LASER)
    except InputRefused as error:
        assert len(str(error).splitlines()) <= 2
    else:
        assert np.isfinite(table.x_mm).all()


def test_turns_in_the_parts_own_plane_are_written_where_there_are_any() -> None:
    text = "step,stage_deg,x_mm,y_mm,laser,face_deg\n0,1,2,3,red,0\n1,1,2,3,red,180\n"
    table = read_order_table(text, TWO_LASERS)
    assert table.face_deg is not None and table.face_deg.tolist() == [0.0, 180.0]
    assert_same_bits(read_order_table(write_order_table(table), TWO_LASERS), table)
    with pytest.raises(InputRefused, match="0 or 180"):
        read_order_table(text.replace("180", "90"), TWO_LASERS)
