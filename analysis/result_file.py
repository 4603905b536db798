"""A fit result as the dictionary of result.json, and as lines for a terminal."""

import json
import math
from collections.abc import Sequence
from typing import Any

from pitchsweep.analysis.analysis_errors import NoResult
from pitchsweep.analysis.decision_words import decision_words
from pitchsweep.analysis.lot_parts import LotPart, lot_values
from pitchsweep.analysis.number_text import (
    plain_percent,
    relative,
    rounded,
    significant,
)
from pitchsweep.analysis.records import (
    BudgetLine,
    Decision,
    MonteCarlo,
    Nuisance,
    PitchResult,
    PitchSeen,
    WavelengthFound,
)


def result_dict(result: PitchResult) -> dict[str, Any]:
    """Every key of result.json, in plain Python types that JSON can hold.

    Lengths in nm. ``dof`` and other side values that are not finite become None (an
    infinite ``dof`` means that no finite number limits k). ``decision`` is the
    outcome (None without a tolerance); its rule, probability and limits stand beside.

    Raises NoResult where the pitch or its uncertainty is not a finite number.
    """
    _check_finite(result)
    return {
        "part": result.part,
        "serial": result.serial,
        "simulated": result.origin == "simulated",
        "pitch_nm": float(result.pitch_nm),
        "u_pitch_nm": float(result.u_pitch_nm),
        "U_pitch_nm": float(result.U_pitch_nm),
        "k": float(result.k),
        "coverage": float(result.coverage),
        "dof": _number(result.dof),
        "pitch_at_C": _number(result.pitch_at_C),
        "reduced_chi2": _number(result.reduced_chi2),
        "steps_used": int(result.steps_used),
        "spots_used": int(result.spots_used),
        "orders_used": [int(order) for order in result.orders_used],
        "rejected": result.rejected_counts(),
        "budget": [_budget(line) for line in result.budget],
        "nuisance": [_nuisance(item) for item in result.nuisance],
        "wavelengths": [vars(found) for found in result.wavelengths],
        "pitches_seen": [_pitch_seen(seen) for seen in result.pitches_seen],
        **_decision(result.decision),
        **_drawn(result.monte_carlo),
        "jumps": [vars(jump) for jump in result.jumps],
        "advice": list(result.advice),
        "assumed_absent": list(result.assumed_absent),
        "warnings": list(result.warnings),
        "asked": list(result.asked),
        "origin": result.origin,
        "software": result.software,
        "inputs_sha256": result.inputs_sha256,
    }


def result_json(result: PitchResult, lot: Sequence[LotPart] = ()) -> str:
    """The text of result.json: indented, no NaN or infinity, newline at the end.

    ``lot``: every part of the run's lot, ``result`` being that of the first.
    Raises NoResult where a pitch or its uncertainty is not a finite number.
    """
    for one in lot:
        _check_finite(one.result)
    values = result_dict(result)
    if lot:
        values["parts"] = [_finite(part) for part in lot_values(lot)]
    text = json.dumps(values, indent=2, ensure_ascii=False, allow_nan=False)
    return text + "\n"


def used_words(result: PitchResult) -> str:
    """How many spots of how many steps the fit used."""
    steps = "step" if result.steps_used == 1 else "steps"
    return f"{spots_words(result.spots_used)} of {result.steps_used} {steps}"


def spots_words(count: int) -> str:
    """A number of spots: 1 spot, 2 spots."""
    return f"{count} spot" if count == 1 else f"{count} spots"


def unused_words(result: PitchResult) -> str:
    """How many spots were not used, and for which reasons."""
    said = spots_words(len(result.rejected))
    reasons = [
        f"{row['reason'].replace('-', ' ')} ({row['count']})"
        for row in result.rejected_counts()
    ]
    return f"{said}: {', '.join(reasons)}" if reasons else said


def wavelength_words(found: WavelengthFound) -> str:
    """A wavelength that the sweep tells, and how well it was known before."""
    now = rounded(found.vacuum_nm, found.U_nm)
    return (
        f"{found.laser}: {now.value} nm +/- {now.u} nm in vacuum, k = {found.k:.2f} "
        f"(known before with u {significant(found.u_prior_nm)} nm)"
    )


def agreement_words(result: PitchResult) -> str:
    """Reduced chi-squared, or that there are too few spots for one."""
    if not math.isfinite(result.reduced_chi2):
        return "not known: no more spots than unknowns"
    return f"{result.reduced_chi2:.2f}"


def summary_lines(result: PitchResult) -> list[str]:
    """What a terminal shows: pitch, U, k, decision, what was used, warnings."""
    pitch = rounded(result.pitch_nm, result.U_pitch_nm)
    used = ", ".join(order_text(order) for order in result.orders_used)
    head = ["Simulated  invented data, no real part was measured"]
    lines = [
        *(head if result.origin == "simulated" else []),
        f"Pitch      {pitch.value} nm +/- {pitch.u} nm at {result.pitch_at_C:g} C",
        f"           k = {result.k:.2f}, coverage {plain_percent(result.coverage)},"
        f" U/pitch = {relative(result.U_pitch_nm, result.pitch_nm)}",
        f"Decision   {decision_words(result)}",
        *(f"Wavelength {wavelength_words(w)}" for w in result.wavelengths),
        f"Used       {used_words(result)}, orders {used}",
        f"Not used   {unused_words(result)}",
        f"Agreement  reduced chi-squared {agreement_words(result)}",
    ]
    if result.monte_carlo is not None:
        lines.append(f"Drawn      {drawn_words(result.monte_carlo)}")
    lines += [f"Warning    {warning}" for warning in result.warnings]
    return [line.replace("\N{MINUS SIGN}", "-") for line in lines]


def drawn_words(drawn: MonteCarlo) -> str:
    """The Monte Carlo interval, and whether it bears pitch +- k u of the fit out."""
    low = rounded(drawn.low_nm, drawn.u_nm)
    high = rounded(drawn.high_nm, drawn.u_nm)
    within = f"within {significant(drawn.tolerance_nm)} nm"
    if not drawn.settled:
        verdict = f"not settled to a fifth of {significant(drawn.tolerance_nm)} nm"
    elif drawn.validated:
        verdict = f"U of the fit agrees {within}"
    else:
        verdict = f"U of the fit does not agree {within} and holds both ends instead"
    return (
        f"{low.value} to {high.value} nm, u {low.u} nm, from {drawn.draws} draws of all"
        f" inputs; {verdict}"
    )


def order_text(order: int) -> str:
    """An order with its sign: -1, 0, +2 (with a true minus sign)."""
    return f"{order:+d}".replace("-", "\N{MINUS SIGN}") if order else "0"


def subset_text(subset: str) -> str:
    """The name of a part of the data, an order in it with a true minus sign."""
    return subset.replace("order -", "order \N{MINUS SIGN}")


def _check_finite(result: PitchResult) -> None:
    for name in ("pitch_nm", "u_pitch_nm", "U_pitch_nm", "k", "coverage"):
        if not math.isfinite(getattr(result, name)):
            raise NoResult(f"The fit gave no finite {name}.")


def _finite(values: dict[str, Any]) -> dict[str, Any]:
    """``values`` with None for side values that are not finite."""
    return {
        key: _number(value) if isinstance(value, float) else value
        for key, value in values.items()
    }


def _number(value: float | None) -> float | None:
    return float(value) if value is not None and math.isfinite(value) else None


def _budget(line: BudgetLine) -> dict[str, Any]:
    row = {"source": line.source, "kind": line.kind, "u_nm": _number(line.u_nm)}
    return {**row, "detail": line.detail} if line.detail else row


def _nuisance(item: Nuisance) -> dict[str, Any]:
    return {
        "name": item.name,
        "value": _number(item.value),
        "u": _number(item.u),
        "unit": item.unit,
        "prior": _number(item.prior),
        "u_prior": _number(item.u_prior),
        "correlation": _number(item.correlation),
    }


def _pitch_seen(seen: PitchSeen) -> dict[str, Any]:
    return {
        "subset": seen.subset,
        "pitch_nm": _number(seen.pitch_nm),
        "u_nm": _number(seen.u_nm),
        "deviation_nm": _number(seen.deviation_nm),
        "u_deviation_nm": _number(seen.u_deviation_nm),
        "spots": int(seen.spots),
    }


def _drawn(drawn: MonteCarlo | None) -> dict[str, Any]:
    if drawn is None:
        return {}
    return {
        "monte_carlo": {
            "pitch_nm": _number(drawn.pitch_nm),
            "u_pitch_nm": _number(drawn.u_nm),
            "interval_nm": [_number(drawn.low_nm), _number(drawn.high_nm)],
            "draws": int(drawn.draws),
            "lost": int(drawn.lost),
            "tolerance_nm": _number(drawn.tolerance_nm),
            "settled": bool(drawn.settled),
            "validated": bool(drawn.validated),
        }
    }


def _decision(decision: Decision) -> dict[str, Any]:
    return {
        "decision": decision.outcome,
        "decision_rule": decision.rule,
        "conformance_probability": _number(decision.conformance_probability),
        "tolerance_nm": None
        if decision.lower_nm is None or decision.upper_nm is None
        else [_number(decision.lower_nm), _number(decision.upper_nm)],
    }
