"""The uncertainty budget as bars."""

from matplotlib.axes import Axes
from matplotlib.figure import Figure

from pitchsweep.analysis.number_text import percent, share_text
from pitchsweep.analysis.picture_style import (
    ACCENT,
    ACCENT_SOFT,
    PAGE_MM,
    Drawing,
    drawable,
    say_instead,
)
from pitchsweep.analysis.records import BudgetLine, PitchResult

MOST_BARS = 12


def budget_shares(budget: tuple[BudgetLine, ...]) -> list[tuple[BudgetLine, float]]:
    """Every line with its share of the summed variance (0 to 1), largest first."""
    total = sum(line.u_nm**2 for line in budget)
    ranked = sorted(budget, key=lambda line: (-line.u_nm, line.source))
    return [(line, line.u_nm**2 / total if total > 0.0 else 0.0) for line in ranked]


def budget_svg(result: PitchResult) -> str:
    """The SVG text of the budget."""
    return budget_drawing(result).svg()


def budget_drawing(result: PitchResult) -> Drawing:
    """One bar for each source, largest first; the smallest ones joined if many."""
    rows = _at_most(budget_shares(result.budget), MOST_BARS)

    def draw(figure: Figure) -> None:
        axes = figure.subplots()
        if not rows:
            say_instead(axes, "no budget")
            return
        for place, (line, share) in enumerate(rows):
            _draw_bar(axes, place, line, share)
        axes.set_yticks(range(len(rows)), [drawable(line.source) for line, _ in rows])
        axes.set_ylim(len(rows) - 0.4, -0.6)
        axes.set_xlim(0.0, 1.32 * rows[0][0].u_nm or 1.0)
        axes.tick_params(axis="y", length=0.0)
        axes.set_xlabel("standard uncertainty of the pitch from this source alone, nm")
        axes.grid(True, axis="x")

    height = 20.0 + 6.4 * max(2, len(rows))
    return Drawing(draw, "budget", PAGE_MM, height)


def _draw_bar(axes: Axes, place: int, line: BudgetLine, share: float) -> None:
    statistics = line.kind == "A"
    axes.barh(
        place,
        line.u_nm,
        height=0.62,
        color=ACCENT_SOFT if statistics else ACCENT,
        edgecolor=ACCENT,
        hatch="////" if statistics else None,
        linewidth=0.6,
    )
    axes.annotate(
        f"{share_text(line.u_nm, share)} nm, {percent(share)}, kind {line.kind}",
        (line.u_nm, place),
        xytext=(4.0, 0.0),
        textcoords="offset points",
        va="center",
        fontsize=6.8,
    )


def _at_most(
    rows: list[tuple[BudgetLine, float]], most: int
) -> list[tuple[BudgetLine, float]]:
    if len(rows) <= most:
        return rows
    kept, rest = rows[: most - 1], rows[most - 1 :]
    kinds = {line.kind for line, _ in rest}
    joined = BudgetLine(
        f"{len(rest)} smaller sources together",
        kinds.pop() if len(kinds) == 1 else "A and B",
        sum(line.u_nm**2 for line, _ in rest) ** 0.5,
    )
    return [*kept, (joined, sum(share for _, share in rest))]
