"""How the PDF report looks: fonts, paragraph styles, and text that cannot break it.

The letters are DejaVu Sans, which comes with matplotlib and is put into the file.
"""

import unicodedata
from functools import cache
from pathlib import Path
from xml.sax.saxutils import escape

import matplotlib
from reportlab.lib.colors import HexColor
from reportlab.lib.enums import TA_RIGHT
from reportlab.lib.styles import ParagraphStyle
from reportlab.lib.units import mm
from reportlab.pdfbase.pdfmetrics import registerFont, stringWidth
from reportlab.pdfbase.ttfonts import TTFont
from reportlab.platypus import Paragraph

from pitchsweep.analysis.picture_style import INK, LIMIT, SOFT_INK

PLAIN, BOLD = "DejaVuSans", "DejaVuSans-Bold"
LONGEST_TEXT = 1500
"""Longer texts are cut: a box has to fit on a page."""
CUT = "\N{HORIZONTAL ELLIPSIS}"


def style(name: str) -> ParagraphStyle:
    """The paragraph style of that name; see ``_styles``."""
    return _styles()[name]


def paragraph(
    text: str, name: str = "body", *, longest: int = LONGEST_TEXT
) -> Paragraph:
    """``text`` as it stands, in the style ``name``; no letter of it is a command."""
    return Paragraph(escape(printable(text, longest)), style(name))


def printable(text: str, longest: int = LONGEST_TEXT) -> str:
    """``text`` on one line, cut if very long, with no letter that cannot be shown.

    A letter that the font lacks, or that is no letter (controls, turns of the
    writing direction), is shown as its number: U+90E8 as "[U+90E8]".
    """
    letters = _letters()
    line = "".join(
        c if ord(c) in letters and unicodedata.category(c)[0] != "C" else _number_of(c)
        for c in " ".join(text[:longest].split())
    )
    if len(line) > longest or len(text) > longest:
        line = line[: longest - 1] + CUT
    return line


def fitted(text: str, *, size: float, width: float) -> str:
    """``text`` printable and short enough for ``width`` points at ``size`` points."""
    fonts()
    line = printable(text)
    if stringWidth(line, PLAIN, size) <= width:
        return line
    while line and stringWidth(line + CUT, PLAIN, size) > width:
        line = line[:-1]
    return line.rstrip() + CUT


@cache
def fonts() -> None:
    """Makes the two fonts known to the PDF library."""
    folder = Path(matplotlib.get_data_path()) / "fonts" / "ttf"
    for name in (PLAIN, BOLD):
        registerFont(TTFont(name, folder / f"{name}.ttf"))


@cache
def _letters() -> frozenset[int]:
    """Numbers of the letters that both fonts can show."""
    folder = Path(matplotlib.get_data_path()) / "fonts" / "ttf"
    plain, bold = (
        set(TTFont(name, folder / f"{name}.ttf").face.charToGlyph)
        for name in (PLAIN, BOLD)
    )
    return frozenset(plain & bold)


def _number_of(letter: str) -> str:
    return f"[U+{ord(letter):04X}]"


@cache
def _styles() -> dict[str, ParagraphStyle]:
    fonts()
    body = ParagraphStyle(
        "body",
        fontName=PLAIN,
        fontSize=8.5,
        leading=12.0,
        textColor=HexColor(INK),
        bulletFontName=PLAIN,
        bulletFontSize=8.5,
        splitLongWords=1,
    )
    cell = ParagraphStyle("cell", body, fontSize=7.2, leading=9.4)
    soft, limit = HexColor(SOFT_INK), HexColor(LIMIT)
    return {
        made.name: made
        for made in (
            body,
            cell,
            ParagraphStyle("soft", body, textColor=soft),
            ParagraphStyle("caption", body, fontSize=7.4, leading=10.0, textColor=soft),
            ParagraphStyle(
                "item", body, leftIndent=3.5 * mm, bulletIndent=0.5 * mm, spaceAfter=1.5
            ),
            ParagraphStyle("title", body, fontName=BOLD, fontSize=15, leading=19),
            ParagraphStyle("big", body, fontName=BOLD, fontSize=21, leading=28),
            ParagraphStyle(
                "decision", body, fontName=BOLD, fontSize=11, leading=16, spaceBefore=5
            ),
            ParagraphStyle("simulated", body, fontName=BOLD, textColor=limit),
            ParagraphStyle(
                "heading",
                body,
                fontName=BOLD,
                fontSize=11,
                leading=15,
                keepWithNext=1,
                spaceBefore=14,
                spaceAfter=2,
            ),
            ParagraphStyle(
                "label", body, fontName=BOLD, fontSize=8, textColor=soft, keepWithNext=1
            ),
            ParagraphStyle("alarm", body, fontName=BOLD, fontSize=8, textColor=limit),
            ParagraphStyle("number", cell, alignment=TA_RIGHT),
            ParagraphStyle("bold", cell, fontName=BOLD),
            ParagraphStyle("bold number", cell, fontName=BOLD, alignment=TA_RIGHT),
            ParagraphStyle(
                "far number",
                cell,
                fontName=BOLD,
                alignment=TA_RIGHT,
                textColor=limit,
            ),
            ParagraphStyle("head", cell, fontName=BOLD, textColor=soft),
            ParagraphStyle(
                "head number",
                cell,
                fontName=BOLD,
                textColor=soft,
                alignment=TA_RIGHT,
            ),
            ParagraphStyle("cell soft", cell, textColor=soft),
        )
    }
