"""What a run's report shows beside the fit: frames, gate, facts. Acts (disk)."""

from collections.abc import Mapping, Sequence

import numpy as np

from pitchsweep.acquire.frame_store import FrameStore
from pitchsweep.acquire.journal_rows import GateRow
from pitchsweep.acquire.run_table import KeptStep, RunRecord
from pitchsweep.analysis.pixel_map import pixels_from_screen
from pitchsweep.analysis.records import UNKNOWN_ORDER, PitchResult
from pitchsweep.analysis.report_context import (
    Fact,
    FrameMark,
    FrameShown,
    ReportContext,
    bench_facts,
    part_facts,
    screen_facts,
)
from pitchsweep.analysis.report_context import GateRow as GateShown
from pitchsweep.analysis.result_file import order_text
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part
from pitchsweep.configs.recipe_model import Recipe

MOST_FRAMES = 6
PER_STEP = ("light-requested", "dark-requested")


def context_of_table(bench: Bench, part: Part) -> ReportContext:
    """What the report of a table or frame set shows."""
    return ReportContext(
        part=part_facts(part),
        screen=screen_facts(bench),
        simulated=False,
        bench_facts=bench_facts(bench),
    )


def context_of_run(record: RunRecord, results: Sequence[PitchResult]) -> ReportContext:
    """What a run's report shows. Raises StorageFailed for a changed frame.

    ``results``: what was found, of a lot that of each part.
    """
    job = record.folder.job
    count = record.meta.get("ledger_entries", "")
    return ReportContext(
        part=part_facts(job.part),
        screen=screen_facts(job.bench),
        simulated=job.bench.twin is not None,
        bench_facts=bench_facts(job.bench),
        run_facts=_facts(record),
        gate_history=gate_shown(record.gate),
        frames=_frames(record, results),
        ledger_entries=int(count) if count else None,
        ledger_head=record.meta.get("ledger_head", ""),
    )


def _facts(record: RunRecord) -> tuple[Fact, ...]:
    job, recipe = record.folder.job, record.folder.job.recipe
    endings = "; ".join(ending or "no ending" for *_, ending in record.sessions)
    facts = [
        Fact("Job", job.job),
        Fact("Run", record.folder.path.name),
        Fact("Begun (UTC)", record.sessions[0][1] if record.sessions else "never"),
        Fact("Sessions", f"{len(record.sessions)} ({endings})"),
        Fact("Steps", f"{len(record.steps)} of {record.planned}"),
        Fact(
            "Recipe",
            f"{recipe.recipe}: {_angle(recipe.start_deg)} to"
            f" {_angle(recipe.stop_deg)} deg by {_angle(recipe.step_deg)} deg,"
            f" {recipe.angle_order}, mounts at"
            f" {', '.join(map(_angle, recipe.mounts_deg))} deg{_faces(recipe)},"
            f" {', '.join(recipe.lasers)}",
        ),
        Fact(
            "Recorded",
            recipe.record
            if recipe.record == "spots"
            else "frames of "
            + ", ".join(f"{e:g}" for e in recipe.exposures_ms)
            + " ms",
        ),
    ]
    facts += [
        Fact(f"Seated {number}", _seated_words(part))
        for number, part in enumerate(job.lot, 1)
    ]
    facts += _permit_facts(record.meta)
    facts += [
        Fact("Fault", f"{f.what}: {f.detail} ({f.policy})") for f in record.faults
    ]
    return tuple(facts)


def _seated_words(part: Part) -> str:
    words = f"{part.part}, serial {part.serial}, {part.place}"
    if part.certified is None:
        return words
    certified = part.certified
    return (
        f"{words}: reference, {certified.pitch_nm!r} nm, u {certified.u_pitch_nm:g} nm"
        f" ({certified.certificate})"
    )


def _permit_facts(meta: Mapping[str, str]) -> list[Fact]:
    """By whose leave there was light, and where the people's ledger stood then."""
    facts = [Fact("Permit", meta["permit"])] if "permit" in meta else []
    if "people_ledger_head" in meta:
        words = f"{meta['people_ledger_entries']}, head {meta['people_ledger_head']}"
        facts.append(Fact("People's ledger entries", words))
    return facts


def _faces(recipe: Recipe) -> str:
    if not any(recipe.faces_deg):
        return ""
    return f" turned in the part's plane by {', '.join(map(_angle, recipe.faces_deg))}"


def _angle(deg: float) -> str:
    return f"{deg:g}".replace("-", "\N{MINUS SIGN}")


def gate_shown(rows: list[GateRow]) -> tuple[GateShown, ...]:
    """The gate's history, runs of light and dark at the steps drawn together."""
    shown: list[GateShown] = []
    lit: list[GateRow] = []
    for row in rows:
        if row.event in PER_STEP and row.state in ("lit", "ready"):
            lit.append(row)
            continue
        shown += _drawn_together(lit)
        lit = []
        shown.append(GateShown(row.utc, row.event, row.state, row.detail))
    return tuple(shown + _drawn_together(lit))


def _drawn_together(rows: list[GateRow]) -> list[GateShown]:
    if not rows:
        return []
    times = sum(row.state == "lit" for row in rows)
    last = rows[-1]
    return [
        GateShown(
            rows[0].utc,
            "light and dark",
            last.state,
            f"lit {times} times for a step, dark after each; last change {last.utc}",
        )
    ]


def _frames(
    record: RunRecord, results: Sequence[PitchResult]
) -> tuple[FrameShown, ...]:
    with_frames = [step for step in record.steps if step.frames]
    if not with_frames:
        return ()
    places = np.linspace(0, len(with_frames) - 1, min(MOST_FRAMES, len(with_frames)))
    store = FrameStore(record.folder.path)
    orders = orders_by_place(*results)
    return tuple(
        _shown(store, record, with_frames[int(round(place))], orders)
        for place in places
    )


def orders_by_place(*results: PitchResult) -> dict[tuple[int, float, float], int]:
    """(step, x_mm, y_mm) of every spot used -> its order."""
    return {
        (int(step), float(x), float(y)): int(order)
        for table in (result.table for result in results)
        for step, x, y, order in zip(
            table.step, table.x_mm, table.y_mm, table.order, strict=True
        )
        if order != UNKNOWN_ORDER
    }


def _shown(
    store: FrameStore,
    record: RunRecord,
    step: KeptStep,
    orders: dict[tuple[int, float, float], int],
) -> FrameShown:
    camera = record.folder.job.bench.camera
    file, sha256, exposure_ms = max(step.frames, key=lambda frame: frame[2])
    marks = []
    for spot in step.found.spots:
        order = orders.get((step.row.step, spot.x_mm, spot.y_mm))
        column, row = pixels_from_screen(spot.x_mm, spot.y_mm, camera)
        label = "not used" if order is None else order_text(order)
        marks.append(FrameMark(column, row, label, order is not None))
    marks += [
        FrameMark(item.x, item.y, item.reason, False)
        for item in step.found.rejected
        if item.unit == "px"
    ]
    return FrameShown(
        image=store.read(file, sha256),
        step=step.row.step,
        stage_deg=step.stage_deg,
        exposure_ms=exposure_ms,
        marks=tuple(marks),
    )
