"""The tables of a report as rows of text, digits cut to what u allows."""

from dataclasses import dataclass

import numpy as np

from pitchsweep.analysis.number_text import (
    percent,
    plain_percent,
    relative,
    rounded,
    share_text,
)
from pitchsweep.analysis.records import (
    Nuisance,
    PitchResult,
    PitchSeen,
    RejectedSpot,
)
from pitchsweep.analysis.report_context import Fact, PartFacts, ReportContext
from pitchsweep.analysis.result_file import (
    agreement_words,
    order_text,
    spots_words,
    subset_text,
    used_words,
    wavelength_words,
)

FAR_IN_U = 2.0
"""A subset or a nuisance further off than this many of its own u is pointed out."""

REJECTION_WORDS = {
    "on-beam-hole": "lies on the hole through which the beam comes",
    "off-screen": "lies beside the screen",
    "no-order-there": "no order of the grating can be there at that angle",
    "between-two-orders": "two orders could be there; it cannot be told which",
    "second-candidate-for-one-order": "a better spot was found for the same order",
    "on-a-mark-of-the-frame": "lies on or beside a mark of the screen frame",
    "beam-wider-than-the-part": "the beam overran the part's clear width",
    "near-a-wavelength-jump": "seen about when the laser wavelength jumped",
    "off-its-track": "too far from the track of its order",
    "stated-error-too-large": "its own position error is too large to help",
    "shape-not-a-spot": "does not have the shape of a spot",
    "too-faint": "too faint against the background",
    "saturated-in-every-exposure": "too bright in every exposure",
    "cut-by-frame-edge": "cut by the edge of the frame",
    "spot-fit-did-not-converge": "its centre could not be found",
    "order-too-near-grazing": "the order leaves too flat along the part",
}


@dataclass(frozen=True)
class BudgetRow:
    """A budget line as text."""

    source: str
    kind: str
    u_nm: str
    share: str
    detail: str


@dataclass(frozen=True)
class SeenRow:
    """The pitch of a subset as text; ``far`` points out a large difference."""

    subset: str
    spots: int
    pitch: str
    deviation: str
    in_u: str
    far: bool


@dataclass(frozen=True)
class NuisanceRow:
    """A nuisance as text; ``moved`` is its way from the prior in units of the prior."""

    name: str
    value: str
    u: str
    prior: str
    u_prior: str
    unit: str
    moved: str
    far: bool


@dataclass(frozen=True)
class ReasonRow:
    """How many spots were not used for one reason, in the trade's plain words."""

    reason: str
    words: str
    count: int


@dataclass(frozen=True)
class RejectedRow:
    """One spot that was not used."""

    step: int
    place: str
    reason: str
    detail: str


def seen_rows(result: PitchResult) -> list[SeenRow]:
    """The consistency table."""
    return [_seen_row(item) for item in result.pitches_seen]


def nuisance_rows(result: PitchResult) -> list[NuisanceRow]:
    """Every fitted side quantity in the order of the fit."""
    return [_nuisance_row(item) for item in result.nuisance]


def reason_rows(result: PitchResult) -> list[ReasonRow]:
    """Reasons with counts, most frequent first."""
    return [
        ReasonRow(row["reason"], _words(row["reason"]), row["count"])
        for row in result.rejected_counts()
    ]


def rejected_rows(result: PitchResult, most: int) -> list[RejectedRow]:
    """The first ``most`` spots not used, by step."""
    ranked = sorted(result.rejected, key=lambda spot: spot.step)[:most]
    return [_rejected_row(spot) for spot in ranked]


def result_facts(result: PitchResult) -> list[Fact]:
    """The figures of the result beside the big line."""
    pitch = rounded(result.pitch_nm, result.u_pitch_nm)
    used = ", ".join(order_text(order) for order in result.orders_used)
    dof = f"{result.dof:.0f}" if np.isfinite(result.dof) else "unlimited"
    return [
        Fact("Standard uncertainty u", f"{pitch.u} nm"),
        Fact("Relative U", relative(result.U_pitch_nm, result.pitch_nm)),
        Fact("Coverage factor k", f"{result.k:.2f} ({dof} degrees of freedom)"),
        Fact("Coverage", plain_percent(result.coverage)),
        Fact("Stated for", f"{result.pitch_at_C:g} °C"),
        Fact("Used", used_words(result)),
        Fact("Orders", used or "none"),
        Fact("Not used", spots_words(len(result.rejected))),
        Fact("Reduced chi-squared", agreement_words(result)),
        *(Fact("Wavelength", wavelength_words(w)) for w in result.wavelengths),
    ]


def part_rows(part: PartFacts | None) -> list[Fact]:
    """Who the part is and what it should be."""
    if part is None:
        return []
    tolerance = "none given"
    if part.lower_nm is not None and part.upper_nm is not None:
        tolerance = f"{part.lower_nm!r} nm to {part.upper_nm!r} nm"
    rows = [
        Fact("Part", part.part),
        Fact("Serial", part.serial),
        Fact("Lot", part.lot),
        Fact("Side", part.side),
        Fact("Place", part.place),
        Fact("Nominal pitch", f"{part.nominal_pitch_nm!r} nm"),
        Fact("Tolerance", tolerance),
    ]
    return [*rows, Fact("Note", part.note)] if part.note else rows


def run_rows(result: PitchResult, context: ReportContext) -> list[Fact]:
    """Run facts, then what ties the report to program, input and ledger."""
    rows = [*context.run_facts, Fact("Software", result.software or "not stated")]
    if result.inputs_sha256:
        rows.append(Fact("Inputs, SHA-256", result.inputs_sha256))
    if context.ledger_entries is not None:
        rows.append(Fact("Ledger entries", str(context.ledger_entries)))
    if context.ledger_head:
        rows.append(Fact("Ledger head", context.ledger_head))
    return rows


def budget_row(
    source: str, kind: str, u_nm: float, share: float, detail: str
) -> BudgetRow:
    """One line of the budget table; ``share`` is of the variance, 0 to 1."""
    return BudgetRow(source, kind, share_text(u_nm, share), percent(share), detail)


def _seen_row(item: PitchSeen) -> SeenRow:
    pitch = rounded(item.pitch_nm, item.u_nm)
    deviation = rounded(item.deviation_nm, item.u_deviation_nm)
    ratio = _ratio(item.deviation_nm, item.u_deviation_nm)
    return SeenRow(
        subset=subset_text(item.subset),
        spots=item.spots,
        pitch=f"{pitch.value} ± {pitch.u}",
        deviation=f"{deviation.value} ± {deviation.u}",
        in_u=_ratio_text(ratio),
        far=bool(abs(ratio) > FAR_IN_U),
    )


def _nuisance_row(item: Nuisance) -> NuisanceRow:
    fitted = rounded(item.value, item.u)
    prior = rounded(item.prior, item.u_prior)
    moved = _ratio(item.value - item.prior, item.u_prior)
    return NuisanceRow(
        name=item.name,
        value=fitted.value,
        u=fitted.u,
        prior=prior.value,
        u_prior=prior.u,
        unit=item.unit,
        moved=_ratio_text(moved),
        far=bool(abs(moved) > FAR_IN_U),
    )


def _rejected_row(spot: RejectedSpot) -> RejectedRow:
    digits = 1 if spot.unit == "px" else 2
    place = f"{spot.x:.{digits}f}, {spot.y:.{digits}f} {spot.unit}"
    return RejectedRow(
        spot.step,
        place.replace("-", "\N{MINUS SIGN}"),
        _words(spot.reason.value),
        spot.detail,
    )


def _words(reason: str) -> str:
    return REJECTION_WORDS.get(reason, reason.replace("-", " "))


def _ratio(value: float, u: float) -> float:
    return value / u if np.isfinite(u) and u > 0.0 else float("nan")


def _ratio_text(ratio: float) -> str:
    if not np.isfinite(ratio):
        return "\N{EN DASH}"
    text = f"{ratio:+.1f}"
    return "0.0" if text in ("+0.0", "-0.0") else text.replace("-", "\N{MINUS SIGN}")
