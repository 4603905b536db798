"""The report as a PDF to hand on: the same content as the HTML page, for paper.

Page one says what a customer asks first; what it rests on follows.
"""

from dataclasses import replace

from reportlab.lib.units import mm
from reportlab.platypus import (
    CondPageBreak,
    Flowable,
    KeepTogether,
    Paragraph,
    Spacer,
)

from pitchsweep.analysis.budget_picture import budget_drawing
from pitchsweep.analysis.decision_words import decision_mark
from pitchsweep.analysis.frame_strip import frames_drawing
from pitchsweep.analysis.number_text import percent, plain_percent, rounded
from pitchsweep.analysis.pdf_document import document_bytes
from pitchsweep.analysis.pdf_gallery import Gallery
from pitchsweep.analysis.pdf_style import paragraph
from pitchsweep.analysis.pdf_tables import boxed, facts_beside, facts_table, framed
from pitchsweep.analysis.picture_style import ACCENT, LIMIT, SOFT_INK, Drawing
from pitchsweep.analysis.pitch_seen_picture import pitches_seen_drawing
from pitchsweep.analysis.records import PitchResult
from pitchsweep.analysis.report_context import PartFacts, ReportContext
from pitchsweep.analysis.report_pdf_tables import (
    absent_words,
    budget_table,
    correlated_words,
    gate_table,
    lot_table,
    nuisance_table,
    reason_table,
    seen_table,
)
from pitchsweep.analysis.report_rows import part_rows, result_facts, run_rows
from pitchsweep.analysis.report_words import (
    BUDGET_SAID,
    DIGITS_SAID,
    DRAWN_SAID,
    FRAMES_SAID,
    NUISANCES_SAID,
    PITCHES_SAID,
    PREDICTED_SAID,
    RESIDUALS_SAID,
    SIMULATED_SAID,
    STANDING_CAUTIONS,
    TRACKS_SAID,
)
from pitchsweep.analysis.residual_picture import residuals_drawing
from pitchsweep.analysis.result_file import drawn_words
from pitchsweep.analysis.track_picture import tracks_drawing

GATE_SHOWN = 40
LOWER = 0.84
"""Some graphs are this much lower than on the HTML page, so that two share a sheet."""
LONGEST_TITLE = 200
BOX_GROUND = "#f5f5f3"
DECISION_COLOURS = {"conforms": ACCENT, None: SOFT_INK}


def report_pdf(result: PitchResult, context: ReportContext) -> bytes:
    """The complete PDF of the report, A4; equal input gives equal bytes.

    Text stays text, fonts and pictures are inside. Of the gate's history the last
    ``GATE_SHOWN`` changes are shown, of the screen map's terms only their number.
    """

    def blocks(gallery: Gallery) -> list[Flowable]:
        return [
            *_first_page(result, context),
            *_picture_sections(result, context, gallery),
            *_table_sections(result, context),
        ]

    name = _part_words(context.part)
    simulated = "Simulated bench: invented data. " if context.simulated else ""
    return document_bytes(
        blocks,
        title=f"Groove pitch: {name}" if name else "Groove pitch",
        footer=f"{simulated}Groove pitch{f' of {name}' if name else ''}",
    )


def _part_words(part: PartFacts | None) -> str:
    return f"{part.part}, serial {part.serial}" if part else ""


def _first_page(result: PitchResult, context: ReportContext) -> list[Flowable]:
    blocks: list[Flowable] = []
    if context.simulated:
        blocks += [boxed([paragraph(SIMULATED_SAID, "simulated")], dashed=True)]
        blocks += [_gap(3)]
    blocks += [*_identity(context.part), _gap(3), _result_box(result), _gap(3)]
    if context.lot:
        blocks += [lot_table(context.lot), _gap(3)]
    if result.warnings:
        blocks += [_warnings(result), _gap(3)]
    blocks += [_label("Cautions")]
    blocks += [_item(text) for text in (*STANDING_CAUTIONS, *context.cautions)]
    blocks += [_gap(2), *_figures(result, context), _gap(2)]
    absent = absent_words(result)
    return [*blocks, paragraph(absent)] if absent else blocks


def _identity(part: PartFacts | None) -> list[Flowable]:
    if part is None:
        return [paragraph("Groove pitch", "title")]
    below = f"Serial {part.serial} · lot {part.lot} · side {part.side} · place"
    return [
        paragraph(f"Groove pitch of {part.part}", "title", longest=LONGEST_TITLE),
        paragraph(f"{below} {part.place}", "soft"),
    ]


def _result_box(result: PitchResult) -> Flowable:
    pitch = rounded(result.pitch_nm, result.U_pitch_nm)
    decision = result.decision
    said = f"Pitch at {result.pitch_at_C:g} °C, with expanded uncertainty U"
    factor = f"k = {result.k:.2f}, coverage {plain_percent(result.coverage)}"
    blocks = [
        paragraph(said, "soft"),
        paragraph(f"{pitch.value} nm ± {pitch.u} nm", "big"),
        paragraph(factor, "soft"),
        paragraph(decision_mark(result), "decision"),
    ]
    if decision.conformance_probability is not None:
        chance = percent(decision.conformance_probability)
        blocks += [
            paragraph(
                f"Probability that the pitch lies within the tolerance: {chance}"
            ),
            paragraph(f"Rule: {decision.rule}", "soft"),
        ]
    colour = DECISION_COLOURS.get(decision.outcome, LIMIT)
    return framed(blocks, colour=colour, ground=BOX_GROUND)


def _warnings(result: PitchResult) -> Flowable:
    rows = [paragraph(warning) for warning in result.warnings]
    return boxed([paragraph("Warnings", "alarm"), *rows])


def _figures(result: PitchResult, context: ReportContext) -> list[Flowable]:
    facts, part = result_facts(result), part_rows(context.part)
    if not part:
        nobody = paragraph("No part file was given.", "soft")
        return [_label("Result"), facts_table(facts), nobody]
    return [_label("Result and part"), facts_beside(facts, part)]


def _picture_sections(
    result: PitchResult, context: ReportContext, gallery: Gallery
) -> list[Flowable]:
    def pictured(drawing: Drawing, said: str) -> list[Flowable]:
        return [gallery.place_for(drawing), paragraph(said, "caption")]

    tracks = pictured(_lower(tracks_drawing(result, context.screen)), TRACKS_SAID)
    residuals = pictured(residuals_drawing(result), RESIDUALS_SAID)
    blocks = [
        *_section("Tracks of all orders", tracks),
        *_section("Measured minus fitted", residuals),
    ]
    few = "The data are too few for a part of them to give a pitch of its own."
    seen: list[Flowable] = [paragraph(few)]
    if result.pitches_seen:
        seen = pictured(_lower(pitches_seen_drawing(result)), PITCHES_SAID)
    blocks += _section("Pitch seen by parts of the data", seen)
    if result.pitches_seen:
        blocks += [_gap(2), seen_table(result)]
    budget = pictured(_lower(budget_drawing(result)), BUDGET_SAID)
    blocks += _section("Uncertainty budget", budget)
    blocks += [_gap(2), budget_table(result), paragraph(correlated_words(result))]
    if result.monte_carlo is not None:
        blocks += [paragraph(f"{DRAWN_SAID}: {drawn_words(result.monte_carlo)}.")]
    if result.advice:
        blocks += _section("What would help", [_item(said) for said in result.advice])
        blocks += [paragraph(PREDICTED_SAID, "caption")]
    if context.frames:
        strip = pictured(frames_drawing(context.frames), FRAMES_SAID)
        blocks += _section("Frames", strip)
    return blocks


def _lower(drawing: Drawing) -> Drawing:
    return replace(drawing, height_mm=LOWER * drawing.height_mm)


def _table_sections(result: PitchResult, context: ReportContext) -> list[Flowable]:
    nuisances = nuisance_table(result)
    blocks = _section(
        "Fitted beside the pitch",
        [paragraph(NUISANCES_SAID, "caption")] if nuisances else [paragraph("None.")],
    )
    blocks += nuisances
    blocks += _section("Spots not used", reason_table(result))
    gate = context.gate_history
    none = "No gate history belongs to these data."
    cut = f"The last {GATE_SHOWN} of {len(gate)} changes."
    blocks += _section(
        "Gate history",
        [] if 0 < len(gate) <= GATE_SHOWN else [paragraph(cut if gate else none)],
    )
    if gate:
        blocks += [gate_table(gate[-GATE_SHOWN:])]
    return [*blocks, *_run_section(result, context)]


def _run_section(result: PitchResult, context: ReportContext) -> list[Flowable]:
    bench: Flowable = paragraph("Not stated.", "soft")
    if context.bench_facts:
        bench = facts_table(context.bench_facts)
    run = facts_table(run_rows(result, context))
    return [
        *_section("Bench and run", [_label("Bench"), bench]),
        KeepTogether([_gap(1), _label("Run"), run]),
        _gap(3),
        paragraph(DIGITS_SAID, "caption"),
    ]


def _section(title: str, blocks: list[Flowable]) -> list[Flowable]:
    """A heading that stays with what follows it."""
    heading = paragraph(title, "heading")
    if not blocks:
        return [CondPageBreak(30 * mm), heading]
    return [KeepTogether([heading, *blocks])]


def _label(text: str) -> Paragraph:
    return paragraph(text, "label")


def _item(text: str) -> Paragraph:
    made = paragraph(text, "item")
    return Paragraph(made.text, made.style, bulletText="•")


def _gap(height_mm: float) -> Spacer:
    return Spacer(1.0, height_mm * mm)
