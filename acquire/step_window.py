"""The picture of one step of a run, from its stored frames. Acts (disk: reads)."""

import csv
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from pitchsweep.acquire.acquire_errors import RunRefused
from pitchsweep.acquire.analyse_run import ORDERS
from pitchsweep.acquire.bench_devices import Shot
from pitchsweep.acquire.durable_files import write_durably
from pitchsweep.acquire.frame_store import FrameStore
from pitchsweep.acquire.journal_file import open_journal
from pitchsweep.acquire.journal_rows import IntentRow
from pitchsweep.acquire.resume import standing
from pitchsweep.acquire.run_folder import RunFolder, open_run_folder
from pitchsweep.acquire.step_spots import (
    camera_of,
    judged_on_bench,
    marks_of,
    mean_dark,
    no_screen,
)
from pitchsweep.acquire.stored_spots import dark_shots, light_shots
from pitchsweep.acquire.sweep_plan import plan_sweep
from pitchsweep.analysis.pixel_map import screen_from_pixels
from pitchsweep.analysis.records import Spot
from pitchsweep.analysis.spot_scene import FittedCandidate
from pitchsweep.analysis.spot_search import Exposure, look
from pitchsweep.analysis.spot_verdicts import Look, verdicts
from pitchsweep.analysis.step_picture import (
    SpotShown,
    StepShown,
    WindowShown,
    step_png,
)
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.fingerprint import fingerprint

_SAME_MM = 0.5
"""A row of the order table is of a spot this near; marks move it by less."""


@dataclass(frozen=True)
class OrderTold:
    """What the order table says of a place; ``order`` is empty where none was found."""

    x_mm: float
    y_mm: float
    order: str


def step_picture(path: Path, step: int, spot: int | None) -> bytes:
    """A PNG of an acknowledged step of the run at ``path``.

    ``spot`` is the number of the candidate whose residuals are shown (None: the
    first). Raises RunRefused where the run has no such step or candidate or holds no
    frames, StorageFailed for a missing or changed frame.
    """
    folder = open_run_folder(path)
    row, lights, darks = _stored(folder, step)
    camera = camera_of(folder.job.bench, lights, darks)
    exposures = [Exposure(shot.frame, shot.exposure_ms) for shot in lights]
    blind = no_screen(folder.job.bench)
    seen = look(exposures, mean_dark(darks), camera, blind=blind)
    orders = _orders_told(folder, step)
    windows = windows_shown(seen, folder.job.bench, step, orders)
    if spot is not None and not 1 <= spot <= len(windows):
        raise RunRefused(
            path, f"step {step} has {len(windows)} candidates, none is number {spot}"
        )
    chosen = (spot or 1) - 1
    longest = max(lights, key=lambda shot: shot.exposure_ms)
    stage = row.stage_deg if row.readback_deg is None else row.readback_deg
    return step_png(
        StepShown(
            image=longest.frame,
            title=f"step {step}, stage {stage:.3f} deg, mount {row.mount_deg:g} deg, "
            f"laser {row.laser}, {longest.exposure_ms:g} ms, speckle contrast "
            f"{seen.speckle.contrast:.2f}, grain {seen.speckle.grain_fwhm_px:.1f} px",
            windows=tuple(windows),
            spot=_shown(seen.fits[chosen], chosen + 1) if windows else None,
        )
    )


def write_step_picture(path: Path, step: int, spot: int | None) -> Path:
    """Writes ``step_picture`` into the run folder; where. Errors as there; OSError."""
    out = path / f"step-{step}.png"
    write_durably(out, step_picture(path, step, spot))
    return out


def _stored(
    folder: RunFolder, step: int
) -> tuple[IntentRow, tuple[Shot, ...], tuple[Shot, ...]]:
    plan = plan_sweep(folder.job, fingerprint(folder.job))
    store = FrameStore(folder.path)
    with open_journal(folder.journal, read_only=True) as journal:
        done = {
            row.step: row for row in standing(plan, journal.intents()).done.values()
        }
        if step not in done:
            numbers = f"{min(done)} to {max(done)}" if done else "none yet"
            raise RunRefused(
                folder.path, f"step {step} is not acknowledged (steps: {numbers})"
            )
        lights = light_shots(journal, store, done[step])
        if not lights:
            raise RunRefused(folder.path, "this run recorded spots, not frames")
        return done[step], lights, dark_shots(journal, store, done[step])


def windows_shown(
    seen: Look, bench: Bench, step: int, orders: Sequence[OrderTold]
) -> list[WindowShown]:
    """Every candidate with what became of it in the run, in the order of the fits."""
    marks = marks_of(seen, bench)
    found = judged_on_bench(seen, marks, bench, step)
    refused = {(r.x, r.y): r for r in found.rejected}
    out = []
    for number, (item, verdict) in enumerate(
        zip(seen.fits, verdicts(seen, step), strict=True), 1
    ):
        shape = item.fit.shape
        used, spot = False, verdict if verdict in found.spots else None
        why = refused.get((shape.column_px, shape.row_px))
        if isinstance(spot, Spot):
            told = _told_of(spot, orders, bench)
            used = told is None or told.order != ""
            text = _spot_words(spot, told)
        elif why is not None:
            text = f"{why.reason.value}: {why.detail} (score {why.score:.0f})"
        else:
            text = "a mark of the screen frame, no spot"
        x, y = item.window.x, item.window.y
        out.append(
            WindowShown(
                number=number,
                column_px=float(x.mean()),
                row_px=float(y.mean()),
                half_px=(float(np.ptp(x)) / 2.0, float(np.ptp(y)) / 2.0),
                verdict=text,
                accepted=used,
            )
        )
    return out


def _spot_words(spot: Spot, told: OrderTold | None) -> str:
    (cc, _), (_, rr) = spot.covariance_px2
    what = ""
    if told is not None:
        what = f"order {told.order}: " if told.order else "not in the fit: "
    return (
        f"{what}{spot.column_px:.2f}, {spot.row_px:.2f} px, u {cc**0.5:.2f}, "
        f"{rr**0.5:.2f}, peak/noise {spot.snr:.0f}"
    )


def _told_of(spot: Spot, orders: Sequence[OrderTold], bench: Bench) -> OrderTold | None:
    """What the last fit made of the spot; None where the run was not fitted."""
    x_mm, y_mm = screen_from_pixels(spot.column_px, spot.row_px, bench.camera)
    near = [t for t in orders if np.hypot(t.x_mm - x_mm, t.y_mm - y_mm) < _SAME_MM]
    return near[0] if near else None


def _orders_told(folder: RunFolder, step: int) -> list[OrderTold]:
    """The step's rows of the run's ``orders.csv``; none where there is no such file."""
    path = folder.path / ORDERS
    if not path.exists():
        return []
    lines = [s for s in path.read_text("utf-8").splitlines() if not s.startswith("#")]
    return [
        OrderTold(float(row["x_mm"]), float(row["y_mm"]), row["order"])
        for row in csv.DictReader(lines)
        if int(row["step"]) == step
    ]


def _shown(item: FittedCandidate, number: int) -> SpotShown:
    fit, window = item.fit, item.window
    half = 0.5 * window.binning
    return SpotShown(
        number=number,
        light=fit.residual + fit.signal,
        model=fit.signal,
        residual=fit.residual * np.sqrt(fit.weight),
        extent_px=(
            float(window.x[0, 0]) - half,
            float(window.x[0, -1]) + half,
            float(window.y[-1, 0]) + half,
            float(window.y[0, 0]) - half,
        ),
    )
