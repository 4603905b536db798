"""Tables of the PDF report: rows of text in, a block that flows over pages out."""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise, zip_longest

from reportlab.lib.colors import HexColor
from reportlab.lib.units import mm
from reportlab.platypus import Flowable, Paragraph, Table

from pitchsweep.analysis.pdf_style import PLAIN, paragraph
from pitchsweep.analysis.picture_style import FAINT, LIMIT, SOFT_INK
from pitchsweep.analysis.report_context import Fact

TEXT_WIDTH_MM = 180.0
LABEL_MM = 38.0


@dataclass(frozen=True)
class Column:
    """A column: heading, width in mm, and whether it holds numbers (to the right)."""

    title: str
    width_mm: float
    number: bool = False


@dataclass(frozen=True)
class Far:
    """The text of a cell that is to catch the eye."""

    text: str


Cell = str | Far


def table(
    columns: Sequence[Column],
    rows: Sequence[Sequence[Cell]],
    *,
    sums: Sequence[Sequence[str]] = (),
) -> Table:
    """``rows`` below the headings, which come again on every page; ``sums`` bold."""
    head = [paragraph(c.title, "head number" if c.number else "head") for c in columns]
    body = [
        [_cell(text, c) for text, c in zip(row, columns, strict=True)] for row in rows
    ]
    last = [
        [
            paragraph(text, "bold number" if c.number else "bold")
            for text, c in zip(row, columns, strict=True)
        ]
        for row in sums
    ]
    made = Table(
        [head, *body, *last],
        colWidths=[c.width_mm * mm for c in columns],
        repeatRows=1,
        hAlign="LEFT",
        style=[
            *_CLOSE,
            ("VALIGN", (0, 0), (-1, 0), "BOTTOM"),
            ("LINEBELOW", (0, 0), (-1, 0), 0.7, HexColor(SOFT_INK)),
            ("LINEBELOW", (0, 1), (-1, -1), 0.4, HexColor(FAINT)),
        ],
    )
    for place in _after_numbers(columns):
        made.setStyle([("LEFTPADDING", (place, 0), (place, -1), 8.0)])
    return made


def facts_table(facts: Sequence[Fact]) -> Table:
    """Facts below one another over the whole width."""
    return _facts([(fact,) for fact in facts], 1)


def facts_beside(left: Sequence[Fact], right: Sequence[Fact]) -> Table:
    """Two lists of facts beside each other, each half as wide."""
    return _facts(list(zip_longest(left, right)), 2)


def framed(blocks: Sequence[Flowable], *, colour: str, ground: str) -> Table:
    """``blocks`` on a ground with a bar of ``colour`` at their left; stays whole."""
    return Table(
        [[list(blocks)]],
        colWidths=[TEXT_WIDTH_MM * mm],
        style=[
            ("FONTNAME", (0, 0), (-1, -1), PLAIN),
            ("BACKGROUND", (0, 0), (-1, -1), HexColor(ground)),
            ("LINEBEFORE", (0, 0), (0, -1), 4.0, HexColor(colour)),
            ("LEFTPADDING", (0, 0), (-1, -1), 12.0),
            ("TOPPADDING", (0, 0), (-1, -1), 7.0),
            ("BOTTOMPADDING", (0, 0), (-1, -1), 8.0),
        ],
    )


def boxed(rows: Sequence[Paragraph], *, dashed: bool = False) -> Table:
    """Paragraphs below one another in a box of the warning colour."""
    dashes = ((3.0, 2.0),) if dashed else ()
    return Table(
        [[row] for row in rows],
        colWidths=[TEXT_WIDTH_MM * mm],
        style=[
            ("FONTNAME", (0, 0), (-1, -1), PLAIN),
            ("BOX", (0, 0), (-1, -1), 1.0, HexColor(LIMIT), 1, *dashes),
            ("LEFTPADDING", (0, 0), (-1, -1), 8.0),
            ("TOPPADDING", (0, 0), (-1, -1), 2.0),
            ("BOTTOMPADDING", (0, 0), (-1, -1), 3.0),
        ],
    )


_CLOSE = (
    ("FONTNAME", (0, 0), (-1, -1), PLAIN),
    ("VALIGN", (0, 0), (-1, -1), "TOP"),
    ("LEFTPADDING", (0, 0), (-1, -1), 0.0),
    ("RIGHTPADDING", (0, 0), (-1, -1), 6.0),
    ("TOPPADDING", (0, 0), (-1, -1), 1.1),
    ("BOTTOMPADDING", (0, 0), (-1, -1), 1.5),
)


def _after_numbers(columns: Sequence[Column]) -> list[int]:
    """The text columns that begin right after a column of numbers."""
    return [
        place + 1
        for place, (here, after) in enumerate(pairwise(columns))
        if here.number and not after.number
    ]


def _cell(text: Cell, column: Column) -> Paragraph:
    if isinstance(text, Far):
        return paragraph(text.text, "far number")
    longest = _longest(column.width_mm)
    return paragraph(text, "number" if column.number else "cell", longest=longest)


def _longest(width_mm: float) -> int:
    """Most letters of a cell: a row of a table must not outgrow a page."""
    return max(20, int(10.0 * width_mm))


def _facts(rows: Sequence[Sequence[Fact | None]], beside: int) -> Table:
    value_mm = TEXT_WIDTH_MM / beside - LABEL_MM
    return Table(
        [
            [cell for fact in row for cell in _fact_cells(fact, value_mm)]
            for row in rows
        ],
        colWidths=[LABEL_MM * mm, value_mm * mm] * beside,
        hAlign="LEFT",
        style=[*_CLOSE],
    )


def _fact_cells(fact: Fact | None, value_mm: float) -> list[Paragraph]:
    label, text = (fact.label, fact.text) if fact else ("", "")
    return [
        paragraph(label, "cell soft", longest=_longest(LABEL_MM)),
        paragraph(text, "cell", longest=_longest(value_mm)),
    ]
