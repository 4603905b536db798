"""The command line: parses, calls, prints, sets an exit code.

Heavy modules are imported by the commands that need them, so that help is quick.
"""

import os
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from pitchsweep.acquire import cli_bench, cli_gate, cli_safety
from pitchsweep.acquire.exit_codes import DONE, REFUSED, exit_code_of, message_of

if TYPE_CHECKING:
    from pitchsweep.acquire.analyse_run import Analysed
    from pitchsweep.configs.job_model import Job

HELP = (
    "Measures the groove pitch of a part: sweep it in front of a screen, or fit spots "
    "and frames taken elsewhere. No safety function."
)
LARGEST_SEED = 2**63 - 1
# Its base classes are what the parser raises, wherever this version keeps them.
_USAGE_ERROR, _CLI_ERROR = typer.BadParameter.__mro__[1:3]

app = typer.Typer(
    help=HELP,
    add_completion=False,
    no_args_is_help=True,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
)


def _show_version(asked: bool) -> None:
    if asked:
        from importlib.metadata import version

        print(f"pitchsweep {version('pitchsweep')}", flush=True)
        raise typer.Exit


@app.callback()
def _program(
    version: Annotated[
        bool,
        typer.Option(
            "--version",
            is_eager=True,
            callback=_show_version,
            help="Show the version and exit.",
        ),
    ] = False,
) -> None:
    pass


Json = Annotated[bool, typer.Option("--json", help="Print the result as JSON.")]


@app.command()
def sweep(
    job: Annotated[
        str | None, typer.Argument(help="A job file, or demo:NAME for a shipped one.")
    ] = None,
    resume: Annotated[
        Path | None, typer.Option(help="Go on with this run folder instead.")
    ] = None,
    runs: Annotated[Path, typer.Option(help="Where run folders go.")] = Path("runs"),
    twin_seed: Annotated[
        int | None,
        typer.Option(min=0, max=LARGEST_SEED, help="Draw the twin's truths anew."),
    ] = None,
    as_json: Json = False,
) -> None:
    """Sweep a job and measure the pitch."""
    if (job is None) == (resume is None):
        raise typer.BadParameter("give a JOB, or --resume RUN, one of them")
    if resume is not None and twin_seed is not None:
        raise typer.BadParameter("--twin-seed belongs to a new sweep")
    from pitchsweep.acquire.bench_opening import open_bench
    from pitchsweep.acquire.progress import progress_for
    from pitchsweep.acquire.sweep_session import resume_run, sweep_job
    from pitchsweep.acquire.watched_sources import sources_of, watching
    from pitchsweep.configs.reader import read_job

    progress = progress_for(sys.stderr)
    if resume is not None:
        folder = resume_run(resume, progress, open_bench)
    else:
        loaded = read_job(str(job))
        opener = watching(open_bench, sources_of(loaded))
        seeded = _seeded(loaded.job, twin_seed)
        folder = sweep_job(seeded, runs, progress, opener)
    progress.say(f"sweep complete; fitting {folder.path}")
    _fit_and_show([folder.path], folder.path, as_json)


@app.command()
def fit(
    inputs: Annotated[
        list[Path],
        typer.Argument(help="Run folders, CSV tables or folders of frames; joined."),
    ],
    bench: Annotated[
        str | None, typer.Option(help="Bench file or demo:NAME, for tables and frames.")
    ] = None,
    part: Annotated[
        str | None, typer.Option(help="Part file or demo:NAME, for tables and frames.")
    ] = None,
    laser: Annotated[
        str | None, typer.Option(help="The one laser of a table without that column.")
    ] = None,
    coverage: Annotated[
        float | None,
        typer.Option(
            min=0.5, max=0.9999, help="Coverage of U (0.95, or the run's own)."
        ),
    ] = None,
    out: Annotated[
        Path | None, typer.Option(help="Write the derived files into this folder.")
    ] = None,
    unknown_pitch: Annotated[
        bool,
        typer.Option(
            "--unknown-pitch", help="Count the orders without the nominal pitch."
        ),
    ] = False,
    monte_carlo: Annotated[
        bool,
        typer.Option(
            "--monte-carlo", help="Draw all inputs too, to bear U out; takes minutes."
        ),
    ] = False,
    as_json: Json = False,
) -> None:
    """Fit runs, order tables or folders of frames.

    The derived files of a run are written anew.
    """
    from pitchsweep.acquire.fit_sources import FitOptions

    options = FitOptions(bench, part, laser, coverage, unknown_pitch, monte_carlo)
    _fit_and_show(inputs, out, as_json, options)


@app.command()
def report(
    run: Annotated[Path, typer.Argument(help="A run folder.")],
    step: Annotated[
        int | None,
        typer.Option(min=0, help="Only draw this step: its frame and candidates."),
    ] = None,
    spot: Annotated[
        int | None,
        typer.Option(min=1, help="With --step: whose residuals are drawn."),
    ] = None,
    as_json: Json = False,
) -> None:
    """Rebuild a run's report, or draw one of its steps.

    The other derived files of the run are written anew too.
    """
    from pitchsweep.acquire.fit_sources import options_of_run
    from pitchsweep.acquire.run_folder import open_run_folder

    if step is not None:
        from pitchsweep.acquire.step_window import write_step_picture

        print(write_step_picture(run, step, spot), flush=True)
        return
    if spot is not None:
        raise typer.BadParameter("--spot belongs to --step")
    path = open_run_folder(run).path
    _fit_and_show([path], run, as_json, options_of_run(path))


cli_bench.register(app)
cli_gate.register(app)
cli_safety.register(app)


def _seeded(job: "Job", twin_seed: int | None) -> "Job":
    if twin_seed is None:
        return job
    if job.bench.twin is None:
        raise typer.BadParameter("--twin-seed needs a bench with 'twin:'")
    twin = job.bench.twin.model_copy(update={"seed": twin_seed})
    bench = job.bench.model_copy(update={"twin": twin})
    return job.model_copy(update={"bench": bench})


def _fit_and_show(
    inputs: Sequence[Path], out: Path | None, as_json: bool, options: Any = None
) -> None:
    from pitchsweep.acquire.analyse_run import analyse, write_derived
    from pitchsweep.acquire.fit_sources import FitOptions, read_sources

    options = options or FitOptions()
    sources = read_sources(inputs, options)
    analysed = analyse(
        sources,
        trust_nominal=not options.unknown_pitch,
        draw_inputs=options.monte_carlo,
    )
    if out is None and len(sources) == 1 and sources[0].run is not None:
        out = sources[0].run.folder.path
    if out is not None:
        write_derived(analysed, out)
    _show(analysed, out, as_json)


def _show(analysed: "Analysed", out: Path | None, as_json: bool) -> None:
    from pitchsweep.acquire.analyse_run import PAPER, PICTURE, REPORT
    from pitchsweep.analysis.lot_parts import lot_lines
    from pitchsweep.analysis.result_file import result_json, summary_lines
    from pitchsweep.safety.safety_errors import CAUTION

    if as_json:
        sys.stdout.write(result_json(analysed.result, analysed.lot))
        sys.stdout.flush()
        return
    lines = summary_lines(analysed.result) + lot_lines(analysed.lot)
    if out is not None:
        lines += [
            f"Report     {out / REPORT} (for paper: {PAPER})",
            f"Picture    {out / PICTURE}",
        ]
    lines.append(f"Caution    {CAUTION}")
    print("\n".join(lines), flush=True)


def main(arguments: Sequence[str] | None = None) -> None:
    """Runs the command line and exits with its code; never shows a traceback."""
    # Set before numpy is loaded: small matrices are quicker on one thread, and sums
    # are the same on every machine size.
    for library in ("OPENBLAS", "OMP", "MKL"):
        os.environ.setdefault(f"{library}_NUM_THREADS", "1")
    sys.exit(run(arguments))


def run(arguments: Sequence[str] | None = None) -> int:
    """Runs the command line; its exit code."""
    command = typer.main.get_command(app)
    try:
        # Not command.main: it turns Ctrl-C and a broken pipe into codes of its own.
        given = sys.argv[1:] if arguments is None else list(arguments)
        with command.make_context("pitchsweep", given) as context:
            command.invoke(context)
        sys.stdout.flush()
        return DONE
    except typer.Exit as exit_request:
        return exit_request.exit_code
    except BrokenPipeError:
        return _reader_gone()
    except BaseException as error:
        return _failed(error)


def _failed(error: BaseException) -> int:
    if isinstance(error, SystemExit):
        return error.code if isinstance(error.code, int) else REFUSED
    if isinstance(error, typer.Abort):
        error = KeyboardInterrupt()
    if isinstance(error, _CLI_ERROR):
        return _refuse_usage(error)
    _say(message_of(error))
    return exit_code_of(error)


def _refuse_usage(error: Any) -> int:
    # Asking for nothing at all shows the help, which is not a failure to be told.
    text = " ".join(str(error.format_message()).split())
    context = getattr(error, "ctx", None)
    path = context.command_path if context is not None else "pitchsweep"
    if type(error).__name__ == "NoArgsIsHelpError":
        print(error.format_message(), file=sys.stderr)
        return REFUSED
    _say(f"{text}\n  see: {path} --help")
    return REFUSED


def _say(text: str) -> None:
    try:
        print(f"pitchsweep: {text}", file=sys.stderr, flush=True)
    except OSError:
        pass


def _reader_gone() -> int:
    # Whoever read our output has left; the work is done and nothing can be said.
    import os

    try:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
    except (OSError, ValueError):
        pass
    return DONE
