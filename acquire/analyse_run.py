"""Fit inputs -> pitch, and the files derived from it. This module acts (disk)."""

import hashlib
from collections.abc import Sequence
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
from pitchsweep.analysis.order_table_file import write_order_table
from pitchsweep.analysis.records import (
    UNKNOWN_ORDER,
    FloatArray,
    OrderTable,
    PitchResult,
)
from pitchsweep.analysis.result_file import result_json
from pitchsweep.configs.fingerprint import fingerprint

ORDERS, REPORT, PAPER, PICTURE = (
    "orders.csv",
    "report.html",
    "report.pdf",
    "result.png",
)


DRAWS_SEED = 0


@dataclass(frozen=True)
class Analysed:
    """A result with what it was made from."""

    result: PitchResult
    given: FitInput
    sources: tuple[FitSource, ...]


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
    try:
        given = joined([source.given for source in sources])
    except ValueError as error:
        raise RunRefused(
            Path(sources[0].given.name if sources else "."),
            str(error),
            "fit them one by one",
        ) from None
    drawn = (MONTE_CARLO,) if draw_inputs else ()
    result = measure(
        given,
        trust_nominal=trust_nominal,
        generator=np.random.default_rng(DRAWS_SEED) if draw_inputs else None,
    )
    result = replace(
        result,
        warnings=(*given.warnings, *result.warnings),
        asked=(*(() if trust_nominal else (UNKNOWN_PITCH,)), *drawn),
        origin=origin_of(sources),
        software=software_name(),
        inputs_sha256=inputs_sha256(given),
    )
    return Analysed(result, given, tuple(sources))


def write_derived(analysed: Analysed, folder: Path) -> None:
    """Writes orders, result, both reports and the picture into ``folder``.

    The same inputs give the same bytes. Raises OSError.
    """
    from pitchsweep.analysis.report_page import report_page
    from pitchsweep.analysis.report_pdf import report_pdf
    from pitchsweep.analysis.summary_picture import summary_png

    result = analysed.result
    run = analysed.sources[0].run if len(analysed.sources) == 1 else None
    context = (
        context_of_table(analysed.given.bench, analysed.given.part)
        if run is None
        else context_of_run(run, result)
    )
    folder.mkdir(parents=True, exist_ok=True)
    table = with_orders(analysed.given.table, result)
    for name, content in (
        (ORDERS, write_order_table(table).encode("utf-8")),
        (RESULT, result_json(result).encode("utf-8")),
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


def with_orders(table: OrderTable, result: PitchResult) -> OrderTable:
    """Every spot of ``table``; the order of those used filled in, the others blank."""
    known = orders_by_place(result)
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
