"""The tables of the PDF report, made of the same rows as those of the HTML page."""

from collections.abc import Sequence

from reportlab.platypus import Flowable, KeepTogether, Table

from pitchsweep.analysis.budget_picture import budget_shares
from pitchsweep.analysis.budget_words import INDEPENDENT, correlation_words
from pitchsweep.analysis.lot_parts import LotRow
from pitchsweep.analysis.number_text import rounded, significant
from pitchsweep.analysis.pdf_style import paragraph
from pitchsweep.analysis.pdf_tables import Column, Far, table
from pitchsweep.analysis.records import PitchResult
from pitchsweep.analysis.report_context import GateRow
from pitchsweep.analysis.report_rows import (
    NuisanceRow,
    SeenRow,
    budget_row,
    nuisance_rows,
    reason_rows,
    seen_rows,
)
from pitchsweep.analysis.report_words import FOLDED

SEEN_COLUMNS = (
    Column("Part of the data", 62.0),
    Column("Spots", 16.0, number=True),
    Column("Pitch ± u, nm", 40.0, number=True),
    Column("Difference ± u, nm", 36.0, number=True),
    Column("Difference in u", 26.0, number=True),
)
BUDGET_COLUMNS = (
    Column("Source", 62.0),
    Column("Kind", 11.0),
    Column("u of the pitch, nm", 32.0, number=True),
    Column("Share", 18.0, number=True),
    Column("Remark", 57.0),
)
NUISANCE_COLUMNS = (
    Column("Quantity", 50.0),
    Column("Fitted", 22.0, number=True),
    Column("u", 18.0, number=True),
    Column("Known before", 25.0, number=True),
    Column("u before", 19.0, number=True),
    Column("Unit", 14.0),
    Column("Moved, in u before", 32.0, number=True),
)
LOT_COLUMNS = (
    Column("Part", 34.0),
    Column("Serial", 20.0),
    Column("Place", 32.0),
    Column("Pitch, nm", 25.0, number=True),
    Column("U, nm", 18.0, number=True),
    Column("k", 11.0, number=True),
    Column("Decision", 40.0),
)
REASON_COLUMNS = (
    Column("Reason", 56.0),
    Column("Meaning", 106.0),
    Column("Count", 18.0, number=True),
)
GATE_COLUMNS = (
    Column("When", 46.0),
    Column("Event", 44.0),
    Column("State after it", 24.0),
    Column("Remark", 66.0),
)

FIRST = "Everything else here is of the first of them."


def absent_words(result: PitchResult) -> str:
    """What no line of the budget carries, as a sentence; empty if nothing is named."""
    if not result.assumed_absent:
        return ""
    absent = "; ".join(result.assumed_absent)
    return f"Assumed absent, and in no line of the budget: {absent}."


def correlated_words(result: PitchResult) -> str:
    """How the lines of the budget hang together, and what goes with the pitch."""
    told = correlation_words(result.nuisance)
    if not told:
        return INDEPENDENT
    fitted = "Quantities fitted beside the pitch that go most with it (correlation)"
    return f"{INDEPENDENT} {fitted}: {told}."


def lot_table(rows: Sequence[LotRow]) -> Flowable:
    """Every part that the run measured, with its pitch and decision."""
    told = [
        (r.part, r.serial, r.place, r.pitch, r.expanded, r.k, r.decision) for r in rows
    ]
    label = paragraph("Parts of this run", "label")
    return KeepTogether([label, table(LOT_COLUMNS, told), paragraph(FIRST, "soft")])


def seen_table(result: PitchResult) -> Flowable:
    """The pitch of parts of the data."""
    rows = [_seen(row) for row in seen_rows(result)]
    label = paragraph("Pitch seen by parts of the data, in figures", "label")
    return KeepTogether([label, table(SEEN_COLUMNS, rows)])


def budget_table(result: PitchResult) -> Flowable:
    """Every source with its share, then u and U."""
    rows = []
    for line, share in budget_shares(result.budget):
        row = budget_row(line.source, line.kind, line.u_nm, share, line.detail)
        rows.append((row.source, row.kind, row.u_nm, row.share, row.detail))
    expanded = rounded(result.pitch_nm, result.U_pitch_nm).u
    u = significant(result.u_pitch_nm)
    sums = (
        ("Combined standard uncertainty u", "", u, "", ""),
        ("Expanded uncertainty U", "", expanded, "", f"k = {result.k:.2f}"),
    )
    label = paragraph("Uncertainty budget, in figures", "label")
    return KeepTogether([label, table(BUDGET_COLUMNS, rows, sums=sums)])


def nuisance_table(result: PitchResult) -> list[Flowable]:
    """What the fit determines besides; of the screen map's terms only their number."""
    rows = nuisance_rows(result)
    shown = [row for row in rows if not row.name.startswith(FOLDED)]
    blocks: list[Flowable] = []
    if shown:
        blocks.append(table(NUISANCE_COLUMNS, [_nuisance(row) for row in shown]))
    if len(shown) < len(rows):
        count = len(rows) - len(shown)
        blocks.append(
            paragraph(
                f"And {count} terms of the screen map, listed in result.json.",
                "caption",
            )
        )
    return blocks


def reason_table(result: PitchResult) -> list[Flowable]:
    """How many spots were not used, for which reason."""
    rows = [(r.reason, r.words, str(r.count)) for r in reason_rows(result)]
    return [table(REASON_COLUMNS, rows) if rows else paragraph("Every spot was used.")]


def gate_table(rows: Sequence[GateRow]) -> Table:
    """Changes of the gate."""
    return table(GATE_COLUMNS, [(r.at_utc, r.event, r.state, r.detail) for r in rows])


def _seen(row: SeenRow) -> tuple[str | Far, ...]:
    in_u = Far(row.in_u) if row.far else row.in_u
    return (row.subset, str(row.spots), row.pitch, row.deviation, in_u)


def _nuisance(row: NuisanceRow) -> tuple[str | Far, ...]:
    moved = Far(row.moved) if row.far else row.moved
    known = (row.prior, row.u_prior)
    return (row.name, row.value, row.u, *known, row.unit, moved)
