"""The verbs of the bench: ``bench calibrate``. Parses, calls, prints."""

import sys
from pathlib import Path
from typing import Annotated

import typer

bench = typer.Typer(no_args_is_help=True, help="What a bench file should say.")


@bench.callback()
def _bench() -> None:
    """What a bench file should say."""


@bench.command("calibrate")
def bench_calibrate(
    bench: Annotated[str, typer.Argument(help="A bench file, or demo:NAME.")],
    frames: Annotated[
        Path, typer.Argument(help="A folder of frame pairs with pairs.csv.")
    ],
    as_json: Annotated[
        bool, typer.Option("--json", help="Print the result as JSON.")
    ] = False,
) -> None:
    """Measure the camera's noise from pairs of frames.

    pairs.csv has the columns file,exposure_ms,light: two frames of an even, steady
    scene at each of several exposures (light on; the brightest saturated) and two dark
    frames (light off).
    """
    from pitchsweep.acquire.camera_pairs import (
        calibrate_camera,
        calibration_json,
        calibration_lines,
    )
    from pitchsweep.configs.reader import read_bench

    camera = read_bench(bench).camera
    seen = calibrate_camera(frames, camera)
    if as_json:
        sys.stdout.write(calibration_json(seen))
    else:
        print("\n".join(calibration_lines(seen, camera)))
    sys.stdout.flush()


def register(app: typer.Typer) -> None:
    """Adds these verbs to the command line."""
    app.add_typer(bench, name="bench")
