"""Blocks -> the bytes of a PDF with page numbers and a footer."""

import io
from collections.abc import Callable, Sequence

from reportlab.lib.colors import HexColor
from reportlab.lib.pagesizes import A4
from reportlab.lib.units import mm
from reportlab.pdfgen.canvas import Canvas
from reportlab.platypus import (
    BaseDocTemplate,
    Flowable,
    Frame,
    PageTemplate,
    Paragraph,
)

from pitchsweep.analysis.pdf_gallery import Gallery, with_pictures
from pitchsweep.analysis.pdf_style import PLAIN, fitted, fonts, printable
from pitchsweep.analysis.picture_style import SOFT_INK

SIDE_MM, TOP_MM, BOTTOM_MM = 15.0, 14.0, 20.0
FOOTER_MM = 11.0
FOOTER_SIZE = 7.0
PAGE_NUMBER_MM = 25.0
"""Width at the right end of the footer that belongs to the page number."""


def document_bytes(
    blocks: Callable[[Gallery], Sequence[Flowable]], *, title: str, footer: str
) -> bytes:
    """The PDF: blocks in their order, drawings in their places, a footer.

    A4 upright. ``blocks`` makes the blocks anew, once to count the pages and once to
    write them; its pictures are places of the gallery it is given. ``footer`` stands
    at the foot of every page beside "page 2 of 4". Equal input gives equal
    bytes: no date is written.
    """
    fonts()
    pages = 0
    for _count_then_write in range(2):
        out = io.BytesIO()
        document = _Document(out, footer, pages)
        gallery = Gallery()
        document.build(list(blocks(gallery)))
        pages = document.page
    return with_pictures(out.getvalue(), gallery, printable(title, 200))


class _Document(BaseDocTemplate):
    """A4 pages with one frame; headings become the outline of the document."""

    def __init__(self, out: io.BytesIO, footer: str, pages: int) -> None:
        super().__init__(
            out, pagesize=A4, invariant=1, lang="en", initialFontName=PLAIN
        )
        self._footer, self._pages = footer, pages
        frame = Frame(
            SIDE_MM * mm,
            BOTTOM_MM * mm,
            A4[0] - 2.0 * SIDE_MM * mm,
            A4[1] - (TOP_MM + BOTTOM_MM) * mm,
            leftPadding=0,
            rightPadding=0,
            topPadding=0,
            bottomPadding=0,
        )
        self.addPageTemplates(PageTemplate("page", [frame], onPage=self._draw_footer))

    def afterFlowable(self, flowable: Flowable) -> None:
        """Adds a heading to the outline."""
        if isinstance(flowable, Paragraph) and flowable.style.name == "heading":
            text = flowable.getPlainText()
            self.canv.bookmarkPage(text)
            self.canv.addOutlineEntry(text, text, 0)

    def _draw_footer(self, canvas: Canvas, document: BaseDocTemplate) -> None:
        left, right = SIDE_MM * mm, A4[0] - SIDE_MM * mm
        width = right - left - PAGE_NUMBER_MM * mm
        text = fitted(self._footer, size=FOOTER_SIZE, width=width)
        canvas.saveState()
        canvas.setFont(PLAIN, FOOTER_SIZE)
        canvas.setFillColor(HexColor(SOFT_INK))
        canvas.drawString(left, FOOTER_MM * mm, text)
        page = f"page {document.page} of {self._pages}"
        canvas.drawRightString(right, FOOTER_MM * mm, page)
        canvas.restoreState()
