"""The picture of one step of a run, from its stored frames. Acts (disk: reads)."""

from pathlib import Path

import numpy as np

from pitchsweep.acquire.acquire_errors import RunRefused
from pitchsweep.acquire.bench_devices import Shot
from pitchsweep.acquire.durable_files import write_durably
from pitchsweep.acquire.frame_store import FrameStore
from pitchsweep.acquire.journal_file import open_journal
from pitchsweep.acquire.journal_rows import IntentRow
from pitchsweep.acquire.resume import standing
from pitchsweep.acquire.run_folder import RunFolder, open_run_folder
from pitchsweep.acquire.step_spots import mean_dark, no_screen
from pitchsweep.acquire.stored_spots import dark_shots, light_shots
from pitchsweep.acquire.sweep_plan import plan_sweep
from pitchsweep.analysis.camera_noise import CameraNoise
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
from pitchsweep.configs.fingerprint import fingerprint


def step_picture(path: Path, step: int, spot: int | None) -> bytes:
    """A PNG of an acknowledged step of the run at ``path``.

    ``spot`` is the number of the candidate whose residuals are shown (None: the
    first). Raises RunRefused where the run has no such step or candidate or holds no
    frames, StorageFailed for a missing or changed frame.
    """
    folder = open_run_folder(path)
    row, lights, darks = _stored(folder, step)
    camera = CameraNoise.from_bench(folder.job.bench.camera)
    exposures = [Exposure(shot.frame, shot.exposure_ms) for shot in lights]
    blind = no_screen(folder.job.bench)
    seen = look(exposures, mean_dark(darks), camera, blind=blind)
    windows = _windows(seen, step)
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


def _windows(seen: Look, step: int) -> list[WindowShown]:
    out = []
    for number, (item, verdict) in enumerate(
        zip(seen.fits, verdicts(seen, step), strict=True), 1
    ):
        shape = item.fit.shape
        if isinstance(verdict, Spot):
            (cc, _), (_, rr) = verdict.covariance_px2
            text = (
                f"{shape.column_px:.2f}, {shape.row_px:.2f} px, u {cc**0.5:.2f}, "
                f"{rr**0.5:.2f}, peak {verdict.snr:.0f} of its noise"
            )
        else:
            text = (
                f"{verdict.reason.value}: {verdict.detail} (score {verdict.score:.0f})"
            )
        x, y = item.window.x, item.window.y
        out.append(
            WindowShown(
                number=number,
                column_px=float(x.mean()),
                row_px=float(y.mean()),
                half_px=(float(np.ptp(x)) / 2.0, float(np.ptp(y)) / 2.0),
                verdict=text,
                accepted=isinstance(verdict, Spot),
            )
        )
    return out


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
