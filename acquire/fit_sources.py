"""What a user names (runs, tables, frame folders) as fit inputs. Acts (disk)."""

import json
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path

from pitchsweep.acquire.acquire_errors import RunRefused
from pitchsweep.acquire.fit_input import FitInput
from pitchsweep.acquire.frame_set import LIST, input_from_frames
from pitchsweep.acquire.run_folder import is_run_folder
from pitchsweep.acquire.run_table import RunRecord, inputs_from_run, read_run
from pitchsweep.analysis.analysis_errors import InputRefused
from pitchsweep.analysis.order_table_file import (
    TableSource,
    decode_order_table,
    read_order_table,
)
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part
from pitchsweep.configs.reader import read_bench, read_part

RESULT = "result.json"
UNKNOWN_PITCH, MONTE_CARLO = "unknown-pitch", "monte-carlo"
"""What can be asked for beyond a plain fit, as the result says it."""


@dataclass(frozen=True)
class FitOptions:
    """What the user said beside the inputs; a run brings its own bench and part."""

    bench: str | None = None
    part: str | None = None
    laser: str | None = None
    coverage: float | None = None
    unknown_pitch: bool = False
    monte_carlo: bool = False


@dataclass(frozen=True)
class FitSource:
    """One input; ``run`` is its record if it is a run.

    ``others`` are the inputs of the further parts of a lot.
    """

    given: FitInput
    run: RunRecord | None = None
    others: tuple[FitInput, ...] = ()


def read_sources(paths: Sequence[Path], options: FitOptions) -> list[FitSource]:
    """Every input in the order given.

    Raises RunRefused, InputRefused, SettingsRefused, StorageFailed, NoResult.
    """
    return [_read(path, options) for path in paths]


def options_of_run(run: Path) -> FitOptions:
    """What a run's result was asked with; a plain fit where there is no result yet."""
    try:
        known = json.loads((run / RESULT).read_text(encoding="utf-8"))
        asked, coverage = known["asked"], known["coverage"]
        if not (isinstance(asked, list) and 0.0 < float(coverage) < 1.0):
            return FitOptions()
    except (OSError, ValueError, KeyError, TypeError):
        return FitOptions()
    return FitOptions(
        coverage=float(coverage),
        unknown_pitch=UNKNOWN_PITCH in asked,
        monte_carlo=MONTE_CARLO in asked,
    )


def _read(path: Path, options: FitOptions) -> FitSource:
    if path.is_dir():
        if is_run_folder(path):
            record = read_run(path)
            given, *others = [
                replace(given, coverage=options.coverage or given.coverage)
                for given in inputs_from_run(record)
            ]
            return FitSource(given, record, tuple(others))
        if (path / LIST).is_file():
            bench, part = _bench_and_part(path, options)
            coverage = options.coverage or 0.95
            return FitSource(
                input_from_frames(path, bench, part, coverage, options.laser)
            )
        raise RunRefused(
            path,
            f"neither a run (no job.yaml) nor a frame set (no {LIST})",
            "give a run folder, a CSV table or a folder of frames",
        )
    try:
        raw = path.read_bytes()
    except OSError as error:
        raise InputRefused(
            f"cannot be read ({error.strerror or error})",
            allowed="a run folder, a CSV table or a folder of frames",
            file=str(path),
        ) from None
    bench, part = _bench_and_part(path, options)
    lasers = _lasers(bench, options.laser)
    source = TableSource(str(path), lasers, bench.reading_u_mm)
    table = read_order_table(decode_order_table(raw, str(path)), source)
    return FitSource(FitInput(str(path), table, bench, part, options.coverage or 0.95))


def _lasers(bench: Bench, laser: str | None) -> tuple[str, ...]:
    if laser is None:
        return tuple(bench.lasers)
    if laser not in bench.lasers:
        raise InputRefused(
            "--laser: the bench has no such laser",
            allowed=", ".join(sorted(bench.lasers)),
            value=laser,
        )
    return (laser,)


def _bench_and_part(path: Path, options: FitOptions) -> tuple[Bench, Part]:
    if options.bench is None or options.part is None:
        missing = "--bench" if options.bench is None else "--part"
        raise InputRefused(
            f"{missing} is missing: a table or frame set does not bring its own",
            allowed=f"{missing} FILE or {missing} demo:NAME",
            file=str(path),
        )
    bench = read_bench(options.bench)
    _lasers(bench, options.laser)
    return bench, read_part(options.part)
