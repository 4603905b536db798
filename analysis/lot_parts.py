"""The parts of a lot that one run measured: for result.json, terminal and report."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from pitchsweep.analysis.decision_words import decision_words
from pitchsweep.analysis.number_text import rounded
from pitchsweep.analysis.records import PitchResult


@dataclass(frozen=True)
class LotPart:
    """One part, or place of a part, and what was found of it."""

    part: str
    serial: str
    place: str
    result: PitchResult


@dataclass(frozen=True)
class LotRow:
    """A part of a lot as text: who it is, its pitch with U in nm, the decision."""

    part: str
    serial: str
    place: str
    pitch: str
    expanded: str
    k: str
    decision: str


def lot_rows(lot: Sequence[LotPart]) -> tuple[LotRow, ...]:
    """A row a part, in the order given."""
    return tuple(_row(one) for one in lot)


def lot_lines(lot: Sequence[LotPart]) -> list[str]:
    """A line a part for a terminal, and what is to be known of the later ones."""
    lines = [
        f"Part       {row.part}, serial {row.serial}, {row.place}: {row.pitch} nm +/- "
        f"{row.expanded} nm, k = {row.k}, {row.decision}"
        for row in lot_rows(lot)
    ]
    said = set(lot[0].result.warnings) if lot else set()
    for one in lot[1:]:
        lines += [
            f"Warning    {one.part} {one.serial}, {one.place}: {warning}"
            for warning in one.result.warnings
            if warning not in said
        ]
    return [line.replace("\N{MINUS SIGN}", "-") for line in lines]


def lot_values(lot: Sequence[LotPart]) -> list[dict[str, Any]]:
    """A dictionary a part, in plain Python types, lengths in nm."""
    return [
        {
            "part": one.part,
            "serial": one.serial,
            "place": one.place,
            "pitch_nm": float(one.result.pitch_nm),
            "u_pitch_nm": float(one.result.u_pitch_nm),
            "U_pitch_nm": float(one.result.U_pitch_nm),
            "k": float(one.result.k),
            "coverage": float(one.result.coverage),
            "reduced_chi2": float(one.result.reduced_chi2),
            "steps_used": int(one.result.steps_used),
            "spots_used": int(one.result.spots_used),
            "decision": one.result.decision.outcome,
            "budget": [
                {"source": line.source, "kind": line.kind, "u_nm": float(line.u_nm)}
                for line in one.result.budget
            ],
            "warnings": list(one.result.warnings),
            "inputs_sha256": one.result.inputs_sha256,
        }
        for one in lot
    ]


def _row(one: LotPart) -> LotRow:
    pitch = rounded(one.result.pitch_nm, one.result.U_pitch_nm)
    return LotRow(
        part=one.part,
        serial=one.serial,
        place=one.place,
        pitch=pitch.value,
        expanded=pitch.u,
        k=f"{one.result.k:.2f}",
        decision=decision_words(one.result),
    )
