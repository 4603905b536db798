"""Fit inputs -> pitch, and the files derived from it. This module acts (disk)."""

import hashlib
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path

import numpy as np

from pitchsweep.acquire.acquire_errors import RunRefused
from pitchsweep.acquire.durable_files import write_durably
from pitchsweep.acquire.fit_input import FitInput, joined
from pitchsweep.acquire.fit_sources import (
    MONTE_CARLO,
    RESULT,
    UNKNOWN_PITCH,
    FitSource,
)
from pitchsweep.acquire.measured_state import measure
from pitchsweep.acquire.run_report import (
    context_of_run,
    context_of_table,
    orders_by_place,
)
from pitchsweep.acquire.run_table import whole_input
from pitchsweep.analysis.analysis_errors import NoResult
from pitchsweep.analysis.lot_parts import LotPart, lot_rows
from pitchsweep.analysis.order_table_file import write_order_table
from pitchsweep.analysis.records import (
    UNKNOWN_ORDER,
    FloatArray,
    OrderTable,
    PitchResult,
)
from pitchsweep.analysis.result_file import result_json
from pitchsweep.configs.fingerprint import fingerprint
from pitchsweep.configs.part_model import Part

ORDERS, REPORT, PAPER, PICTURE = (
    "orders.csv",
    "report.html",
    "report.pdf",
    "result.png",
)


DRAWS_SEED = 0


@dataclass(frozen=True)
class Analysed:
    """A result with what it was made from.

    ``lot`` holds the parts of a lot that have a result, that of ``result`` first;
    empty where there is no lot.
    """

    result: PitchResult
    given: FitInput
    sources: tuple[FitSource, ...]
    lot: tuple[LotPart, ...] = ()


def analyse(
    sources: Sequence[FitSource],
    *,
    trust_nominal: bool = True,
    draw_inputs: bool = False,
) -> Analysed:
    """One fit of everything in ``sources``; see ``measure_pitch``.

    ``draw_inputs``: by Monte Carlo too; the same inputs give the same draws.
    Raises InputRefused, NoResult, or RunRefused where inputs cannot be joined.
    """
    if len(sources) > 1:
        _refuse_lots(sources)
    try:
        given = joined([source.given for source in sources])
    except ValueError as error:
        raise RunRefused(
            Path(sources[0].given.name if sources else "."),
            str(error),
            "fit them one by one",
        ) from None
    drawn = (MONTE_CARLO,) if draw_inputs else ()

    def measured(each: FitInput) -> PitchResult:
        result = measure(
            each,
            trust_nominal=trust_nominal,
            generator=np.random.default_rng(DRAWS_SEED) if draw_inputs else None,
        )
        return replace(
            result,
            warnings=(*each.warnings, *result.warnings),
            asked=(*(() if trust_nominal else (UNKNOWN_PITCH,)), *drawn),
            origin=origin_of(sources),
            software=software_name(),
            inputs_sha256=inputs_sha256(each),
        )

    result = measured(given)
    run = sources[0].run if len(sources) == 1 else None
    if run is None or not run.folder.job.lot:
        return Analysed(result, given, tuple(sources))
    others, missed = _others(sources[0].others, measured)
    result = replace(result, warnings=(*result.warnings, *missed))
    lot = (_lot_part(given.part, result), *others)
    return Analysed(result, given, tuple(sources), lot)


def _refuse_lots(sources: Sequence[FitSource]) -> None:
    for source in sources:
        if source.run is not None and source.run.folder.job.lot:
            raise RunRefused(
                source.run.folder.path,
                "a run of a lot, with several parts of its own, is fitted by itself",
                "fit them one by one",
            )


def _others(
    inputs: Sequence[FitInput], measured: Callable[[FitInput], PitchResult]
) -> tuple[list[LotPart], list[str]]:
    """Further parts of a lot, and a warning for each that gives no result."""
    found, missed = list[LotPart](), list[str]()
    for each in inputs:
        try:
            found.append(_lot_part(each.part, measured(each)))
        except NoResult as error:
            part = each.part
            name = f"{part.part}, serial {part.serial}, {part.place}"
            missed.append(f"no result for {name}: {error.reason}")
    return found, missed


def _lot_part(part: Part, result: PitchResult) -> LotPart:
    return LotPart(part.part, part.serial, part.place, result)


def write_derived(analysed: Analysed, folder: Path) -> None:
    """Writes orders, result, both reports and the picture into ``folder``.

    The same inputs give the same bytes. Raises OSError.
    """
    from pitchsweep.analysis.report_page import report_page
    from pitchsweep.analysis.report_pdf import report_pdf
    from pitchsweep.analysis.summary_picture import summary_png

    result = analysed.result
    results = [one.result for one in analysed.lot] or [result]
    run = analysed.sources[0].run if len(analysed.sources) == 1 else None
    context = (
        context_of_table(analysed.given.bench, analysed.given.part)
        if run is None
        else context_of_run(run, results)
    )
    context = replace(context, lot=lot_rows(analysed.lot))
    folder.mkdir(parents=True, exist_ok=True)
    whole = analysed.given if run is None else whole_input(run)
    table = with_orders(whole.table, *results)
    for name, content in (
        (ORDERS, write_order_table(table).encode("utf-8")),
        (RESULT, result_json(result, analysed.lot).encode("utf-8")),
        (REPORT, report_page(result, context).encode("utf-8")),
        (PAPER, report_pdf(result, context)),
        (PICTURE, summary_png(result, context)),
    ):
        write_durably(folder / name, content)


def origin_of(sources: Sequence[FitSource]) -> str:
    """Where the readings come from, as far as that is known here.

    ``simulated`` (one run of a simulated bench is enough), ``measured`` (only runs of
    benches with ports), or ``handed-in``: a table or frames say nothing of their bench.
    """
    jobs = [source.run.folder.job for source in sources if source.run is not None]
    if any(job.bench.twin is not None for job in jobs):
        return "simulated"
    return "measured" if len(jobs) == len(sources) else "handed-in"


def with_orders(table: OrderTable, *results: PitchResult) -> OrderTable:
    """Every spot of ``table``; the order of those used filled in, the others blank."""
    known = orders_by_place(*results)
    order = np.array(
        [
            known.get((int(step), float(x), float(y)), UNKNOWN_ORDER)
            for step, x, y in zip(table.step, table.x_mm, table.y_mm, strict=True)
        ],
        dtype=np.int64,
    )
    return replace(table, order=order)


def inputs_sha256(given: FitInput) -> str:
    """SHA-256 over the spots (every bit), bench without its twin, part, coverage."""
    digest = hashlib.sha256()
    digest.update(write_order_table(given.table).encode("utf-8"))
    digest.update(given.table.cxy_mm2.tobytes())
    for shared in _shared(given.table):
        digest.update(shared.tobytes())
    if given.table.brightness is not None:
        digest.update(given.table.brightness.tobytes())
    bench = given.bench.model_copy(update={"twin": None})
    digest.update(fingerprint(bench).encode("ascii"))
    digest.update(fingerprint(given.part).encode("ascii"))
    for reference in given.references:
        digest.update(fingerprint(reference).encode("ascii"))
    digest.update(repr(given.coverage).encode("ascii"))
    if any(state is not None for state in given.measured):
        digest.update(repr(given.measured).encode("ascii"))
    return digest.hexdigest()


def _shared(table: OrderTable) -> list[FloatArray]:
    parts = (table.shared_xx_mm2, table.shared_xy_mm2, table.shared_yy_mm2)
    return [part for part in parts if part is not None]


def software_name() -> str:
    """Name and version of this program."""
    try:
        return f"pitchsweep {version('pitchsweep')}"
    except PackageNotFoundError:
        return "pitchsweep (not installed)"
