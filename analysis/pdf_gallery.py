"""The pictures of a PDF: room kept for them while the text is set, then laid in.

The text is set with one library, the pictures are drawn by another as pages of their
own. Each such page becomes a form inside the document (ISO 32000-1, 8.10), shown at
its place: the pictures stay lines and letters, and the fonts are held once.
"""

import io
from dataclasses import dataclass, field

from pypdf import PageObject, PdfReader, PdfWriter
from pypdf.generic import (
    ArrayObject,
    DictionaryObject,
    NameObject,
    PdfObject,
    StreamObject,
)
from reportlab.lib.units import mm
from reportlab.platypus import Flowable

from pitchsweep.analysis.picture_style import Drawing, pdf_of

HIGHEST_PICTURE_MM = 205.0
"""Leaves room on the page for the heading above and the caption below."""


@dataclass
class _Placed:
    """Where a drawing came to lie: page from 1, lower left corner in points, scale."""

    page: int
    x: float
    y: float
    scale: float


@dataclass
class Gallery:
    """The drawings of a document, with the places they came to lie at."""

    drawings: list[Drawing] = field(default_factory=list)
    placed: dict[int, _Placed] = field(default_factory=dict)

    def place_for(self, drawing: Drawing) -> "PicturePlace":
        """A block that keeps room for ``drawing``."""
        self.drawings.append(drawing)
        return PicturePlace(self, len(self.drawings) - 1)


class PicturePlace(Flowable):
    """Room for a drawing, made smaller where the page is too small for it."""

    def __init__(self, gallery: Gallery, index: int) -> None:
        super().__init__()
        self._gallery, self._index = gallery, index
        self._scale = 1.0

    def wrap(self, aW: float, aH: float) -> tuple[float, float]:
        """Width and height in points within the room offered."""
        drawing = self._gallery.drawings[self._index]
        width, height = drawing.width_mm * mm, drawing.height_mm * mm
        highest = HIGHEST_PICTURE_MM * mm
        self._scale = min(1.0, aW / width, highest / height)
        self.width, self.height = self._scale * width, self._scale * height
        return self.width, self.height

    def draw(self) -> None:
        """Notes the place; the drawing itself is laid in afterwards."""
        x, y = self.canv.absolutePosition(0.0, 0.0)
        page = self.canv.getPageNumber()
        self._gallery.placed[self._index] = _Placed(page, x, y, self._scale)


def with_pictures(pages: bytes, gallery: Gallery, title: str) -> bytes:
    """The PDF ``pages`` with every drawing of ``gallery`` laid into its place."""
    writer = PdfWriter(clone_from=io.BytesIO(pages))
    if gallery.placed:
        pictures = PdfReader(io.BytesIO(pdf_of(gallery.drawings)))
        for index, placed in sorted(gallery.placed.items()):
            form = _form(pictures.pages[index], writer)
            _show(form, f"/Picture{index}", placed, writer)
    writer.metadata = {"/Title": title}
    out = io.BytesIO()
    writer.write(out)
    return out.getvalue()


def _stream(found: PdfObject | None) -> StreamObject:
    if not isinstance(found, StreamObject):
        raise TypeError(f"a stream was expected, not {type(found).__name__}")
    return found


def _inner(outer: DictionaryObject, name: str) -> DictionaryObject:
    """The dictionary that ``outer`` holds under ``name``, an empty one if none."""
    if name not in outer:
        outer[NameObject(name)] = DictionaryObject()
    found = outer[name]
    if not isinstance(found, DictionaryObject):
        raise TypeError(f"{name} is no dictionary but {type(found).__name__}")
    return found


def _form(picture: PageObject, writer: PdfWriter) -> StreamObject:
    """The page ``picture`` as a form that ``writer`` holds."""
    content = _stream(picture["/Contents"].get_object())
    form = _stream(content.clone(writer, force_duplicate=True))
    form[NameObject("/Type")] = NameObject("/XObject")
    form[NameObject("/Subtype")] = NameObject("/Form")
    form[NameObject("/BBox")] = picture["/MediaBox"].clone(writer)
    form[NameObject("/Resources")] = picture.raw_get("/Resources").clone(writer)
    if "/Group" in picture:
        form[NameObject("/Group")] = picture["/Group"].clone(writer)
    return form


def _show(form: StreamObject, name: str, placed: _Placed, writer: PdfWriter) -> None:
    """Shows ``form`` at its place, below what is on the page already."""
    page = writer.pages[placed.page - 1]
    named = _inner(_inner(page, "/Resources"), "/XObject")
    named[NameObject(name)] = writer._add_object(form)
    s, x, y = placed.scale, placed.x, placed.y
    shown = StreamObject()
    shown.set_data(
        f"q {s:.5f} 0 0 {s:.5f} {x:.3f} {y:.3f} cm {name} Do Q\n".encode("ascii")
    )
    before = page.raw_get("/Contents")
    after = list(before) if isinstance(before, ArrayObject) else [before]
    page[NameObject("/Contents")] = ArrayObject([writer._add_object(shown), *after])
