"""The report as one HTML page that needs nothing but itself.

Style and pictures are inside the page; it works without scripts and prints on A4.
"""

import base64
from dataclasses import dataclass
from typing import Any

from jinja2 import Environment, PackageLoader, StrictUndefined

from pitchsweep.analysis.budget_picture import budget_shares, budget_svg
from pitchsweep.analysis.budget_words import INDEPENDENT, correlation_words
from pitchsweep.analysis.decision_words import decision_mark
from pitchsweep.analysis.frame_strip import frames_png
from pitchsweep.analysis.number_text import (
    percent,
    plain_percent,
    rounded,
    significant,
)
from pitchsweep.analysis.pitch_seen_picture import pitches_seen_svg
from pitchsweep.analysis.records import Decision, PitchResult
from pitchsweep.analysis.report_context import ReportContext
from pitchsweep.analysis.report_rows import (
    budget_row,
    nuisance_rows,
    part_rows,
    reason_rows,
    rejected_rows,
    result_facts,
    run_rows,
    seen_rows,
)
from pitchsweep.analysis.report_words import (
    BUDGET_SAID,
    DIGITS_SAID,
    DRAWN_SAID,
    FOLDED,
    FRAMES_SAID,
    NUISANCES_SAID,
    PITCHES_SAID,
    PREDICTED_SAID,
    RESIDUALS_SAID,
    SIMULATED_SAID,
    STANDING_CAUTIONS,
    TRACKS_SAID,
)
from pitchsweep.analysis.residual_picture import residuals_svg
from pitchsweep.analysis.result_file import drawn_words
from pitchsweep.analysis.track_picture import tracks_svg

TEMPLATE = "report.html"
REJECTED_SHOWN = 100


@dataclass(frozen=True)
class Picture:
    """A picture inside the page: its data address, what it shows, its caption."""

    address: str
    alt: str
    caption: str


def report_page(result: PitchResult, context: ReportContext) -> str:
    """The complete HTML text of the report; equal input gives equal text."""
    environment = Environment(
        loader=PackageLoader("pitchsweep.analysis", "templates"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    return environment.get_template(TEMPLATE).render(_values(result, context))


def _values(result: PitchResult, context: ReportContext) -> dict[str, Any]:
    pitch = rounded(result.pitch_nm, result.U_pitch_nm)
    decision = result.decision
    nuisances = nuisance_rows(result)
    return {
        "part": context.part,
        "simulated": context.simulated,
        "simulated_said": SIMULATED_SAID,
        "nuisances_said": NUISANCES_SAID,
        "digits_said": DIGITS_SAID,
        "drawn_said": DRAWN_SAID,
        "predicted_said": PREDICTED_SAID,
        "pitch": pitch.value,
        "expanded": pitch.u,
        "k": f"{result.k:.2f}",
        "coverage": plain_percent(result.coverage),
        "at_c": f"{result.pitch_at_C:g}",
        "decision_mark": decision_mark(result),
        "decision_class": decision.outcome or "none",
        "probability": _probability(decision),
        "rule": decision.rule,
        "warnings": result.warnings,
        "cautions": (*STANDING_CAUTIONS, *context.cautions),
        "facts": result_facts(result),
        "part_rows": part_rows(context.part),
        "lot": context.lot,
        "bench_rows": context.bench_facts,
        "run_rows": run_rows(result, context),
        "tracks": _tracks(result, context),
        "residuals": _residuals(result),
        "pitches": _pitches(result) if result.pitches_seen else None,
        "budget_picture": _budget(result),
        "strip": _strip(context),
        "budget": [
            budget_row(line.source, line.kind, line.u_nm, share, line.detail)
            for line, share in budget_shares(result.budget)
        ],
        "u_pitch": significant(result.u_pitch_nm),
        "seen": seen_rows(result),
        "absent": result.assumed_absent,
        "independent": INDEPENDENT,
        "correlated": correlation_words(result.nuisance),
        "drawn": drawn_words(result.monte_carlo) if result.monte_carlo else "",
        "advice": result.advice,
        "nuisances": [n for n in nuisances if not n.name.startswith(FOLDED)],
        "more_nuisances": [n for n in nuisances if n.name.startswith(FOLDED)],
        "reasons": reason_rows(result),
        "rejected": rejected_rows(result, REJECTED_SHOWN),
        "rejected_total": len(result.rejected),
        "gate": context.gate_history,
    }


def _probability(decision: Decision) -> str:
    probability = decision.conformance_probability
    return "" if probability is None else percent(probability)


def _tracks(result: PitchResult, context: ReportContext) -> Picture:
    return Picture(
        _svg_address(tracks_svg(result, context.screen)),
        "Tracks of all orders on the screen against stage angle",
        TRACKS_SAID,
    )


def _residuals(result: PitchResult) -> Picture:
    return Picture(
        _svg_address(residuals_svg(result)),
        "Residuals of the fit against incidence and by order",
        RESIDUALS_SAID,
    )


def _pitches(result: PitchResult) -> Picture:
    return Picture(
        _svg_address(pitches_seen_svg(result)),
        "Pitch seen by each order, side and half of the sweep",
        PITCHES_SAID,
    )


def _budget(result: PitchResult) -> Picture:
    return Picture(
        _svg_address(budget_svg(result)),
        "Uncertainty budget as bars",
        BUDGET_SAID,
    )


def _strip(context: ReportContext) -> Picture | None:
    if not context.frames:
        return None
    return Picture(
        _address(frames_png(context.frames), "image/png"),
        "Six frames of the camera with spots marked",
        FRAMES_SAID,
    )


def _svg_address(svg: str) -> str:
    return _address(svg.encode("utf-8"), "image/svg+xml")


def _address(content: bytes, media_type: str) -> str:
    return f"data:{media_type};base64,{base64.b64encode(content).decode('ascii')}"
