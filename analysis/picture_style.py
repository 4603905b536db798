"""How the pictures look, and how a drawn figure becomes bytes.

Figures are made through the object interface and drawn by a canvas without a window;
the user's own plotting settings are not read. Equal input gives equal bytes. Colours
keep apart for colour-blind eyes and in grey print: cool for negative orders, warm for
positive ones, near-black for the zero order, and the marker's shape says the same.
"""

import io
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any, Literal

import matplotlib
from matplotlib.axes import Axes
from matplotlib.backends.backend_pdf import PdfPages
from matplotlib.figure import Figure
from matplotlib.font_manager import findfont, get_font
from matplotlib.patheffects import Normal, Stroke

from pitchsweep.analysis.records import UNKNOWN_ORDER

INK = "#23262e"
SOFT_INK = "#5d6470"
FAINT = "#e3e5e8"
BAND = "#eef0ea"
HOLE = "#dfe2d8"
REJECTED = "#8d8f96"
ACCENT = "#3f6f5c"
ACCENT_SOFT = "#a9c4b6"
LIMIT = "#8a3d6b"
COOL = ("#2f7f9e", "#123f5c", "#79b4c4", "#4b5f9e")
WARM = ("#c06a1f", "#7a3411", "#dba55a", "#a3543f")

PAGE_MM = 180.0
PDF_DPI = 200.0
"""What a PDF holds as an image, such as very many points, comes at this density."""
MANY_POINTS = 4000
"""Above this many points a vector picture draws its points as one raster image."""

_STYLE: dict[Any, Any] = {
    "font.family": "DejaVu Sans",
    "font.size": 7.5,
    "text.parse_math": False,
    "axes.titlesize": 8.0,
    "axes.titlelocation": "left",
    "axes.labelcolor": SOFT_INK,
    "axes.edgecolor": SOFT_INK,
    "axes.linewidth": 0.6,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.axisbelow": True,
    "text.color": INK,
    "xtick.color": SOFT_INK,
    "ytick.color": SOFT_INK,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "grid.color": FAINT,
    "grid.linewidth": 0.5,
    "legend.frameon": False,
    "svg.fonttype": "path",
    "pdf.fonttype": 42,
    "figure.facecolor": "white",
    "savefig.facecolor": "white",
}

_UNSAID = {
    "svg": ("Date", "Creator", "Format", "Type"),
    "png": ("Software",),
    "pdf": ("CreationDate", "Creator", "Producer"),
}
"""What a file would say of itself that is not the picture, such as when it was made."""


@dataclass(frozen=True)
class Drawing:
    """A picture not yet turned into bytes: what draws it, its name and its size.

    ``draw`` puts the picture on an empty figure of ``width_mm`` x ``height_mm``.
    """

    draw: Callable[[Figure], None]
    name: str
    width_mm: float
    height_mm: float

    def svg(self) -> str:
        """The picture as SVG text."""
        size_mm = (self.width_mm, self.height_mm)
        return _drawn(self.draw, self.name, size_mm, "svg").decode("utf-8")

    def png(self, dpi: float = 160.0) -> bytes:
        """The picture as PNG bytes."""
        size_mm = (self.width_mm, self.height_mm)
        return _drawn(self.draw, self.name, size_mm, "png", dpi)


@contextmanager
def house_style(salt: str) -> Iterator[None]:
    """Drawing settings of the house inside the block, the former ones after it."""
    with matplotlib.rc_context():
        matplotlib.rcdefaults()
        matplotlib.rcParams.update(_STYLE)
        matplotlib.rcParams["svg.hashsalt"] = salt
        yield


def svg_picture(
    draw: Callable[[Figure], None], *, name: str, width_mm: float, height_mm: float
) -> str:
    """The SVG text of what ``draw`` puts on an empty figure of the given size."""
    return Drawing(draw, name, width_mm, height_mm).svg()


def png_picture(
    draw: Callable[[Figure], None],
    *,
    name: str,
    width_mm: float,
    height_mm: float,
    dpi: float = 160.0,
) -> bytes:
    """The PNG bytes of what ``draw`` puts on an empty figure of the given size."""
    return Drawing(draw, name, width_mm, height_mm).png(dpi)


def pdf_of(drawings: Sequence[Drawing]) -> bytes:
    """A PDF with one page for each drawing, of its size; letters stay letters.

    One file for all shares the fonts, which is most of the work.
    """
    out = io.BytesIO()
    with (
        house_style("pdf"),
        PdfPages(out, metadata=dict.fromkeys(_UNSAID["pdf"])) as pages,
    ):
        for drawing in drawings:
            figure = _figure((drawing.width_mm, drawing.height_mm), PDF_DPI)
            drawing.draw(figure)
            pages.savefig(figure, dpi=PDF_DPI)
    return out.getvalue()


def _drawn(
    draw: Callable[[Figure], None],
    name: str,
    size_mm: tuple[float, float],
    kind: Literal["svg", "png"],
    dpi: float = 160.0,
) -> bytes:
    with house_style(name):
        figure = _figure(size_mm, dpi)
        draw(figure)
        out = io.BytesIO()
        metadata = dict.fromkeys(_UNSAID[kind])
        figure.savefig(out, format=kind, dpi=dpi, metadata=metadata)
        return out.getvalue()


def _figure(size_mm: tuple[float, float], dpi: float) -> Figure:
    return Figure(
        figsize=(size_mm[0] / 25.4, size_mm[1] / 25.4),
        dpi=dpi,
        layout="constrained",
    )


def order_colour(order: int) -> str:
    """The colour of an order."""
    if order in (0, UNKNOWN_ORDER):
        return INK
    shades = WARM if order > 0 else COOL
    return shades[(abs(order) - 1) % len(shades)]


def order_marker(order: int) -> str:
    """The marker of an order: round for zero, pointing up or down by its sign."""
    if order in (0, UNKNOWN_ORDER):
        return "o"
    return "^" if order > 0 else "v"


def drawable(text: str, *, length: int = 60) -> str:
    """``text`` on one line, shortened, with "?" where the font has no letter."""
    letters = get_font(findfont("DejaVu Sans")).get_charmap()
    line = " ".join(text.split())
    if len(line) > length:
        line = line[: length - 1] + "\N{HORIZONTAL ELLIPSIS}"
    return "".join(c if ord(c) in letters else "?" for c in line)


def halo(width: float = 2.0) -> list[Stroke | Normal]:
    """A white rim that keeps a label readable over lines."""
    return [Stroke(linewidth=width, foreground="white"), Normal()]


def say_instead(axes: Axes, text: str) -> None:
    """An empty panel that says why it is empty."""
    axes.set_axis_off()
    axes.text(
        0.5,
        0.5,
        text,
        ha="center",
        va="center",
        color=SOFT_INK,
        transform=axes.transAxes,
    )
