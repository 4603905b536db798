"""Run folders: ``runs/<UTC start>_<job>/`` and what is frozen in them. Acts (disk)."""

from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

from pitchsweep.acquire.acquire_errors import RunRefused
from pitchsweep.acquire.durable_files import sync_folder, write_durably
from pitchsweep.configs.fingerprint import fingerprint
from pitchsweep.configs.frozen_job import freeze, thaw
from pitchsweep.configs.job_model import Job

JOB = "job.yaml"
JOURNAL = "run.db"
LEDGER = "ledger.jsonl"
MOST_ATTEMPTS = 1000


@dataclass(frozen=True)
class RunFolder:
    """A run folder and the job frozen in it."""

    path: Path
    job: Job

    @property
    def journal(self) -> Path:
        """Where ``run.db`` is."""
        return self.path / JOURNAL

    @property
    def ledger(self) -> Path:
        """Where the run's own safety ledger is."""
        return self.path / LEDGER

    @property
    def twin(self) -> Path:
        """Where a twin keeps its truth, log and state; analysis never looks there."""
        return self.path / "twin"


def create_run_folder(runs: Path, job: Job, now: datetime | None = None) -> RunFolder:
    """A new folder under ``runs`` with ``job.yaml``; ``runs`` is made if needed.

    ``now`` is the UTC start (default: now). Raises OSError if it cannot be written.
    """
    start = (now or datetime.now(UTC)).strftime("%Y%m%dT%H%M%SZ")
    runs.mkdir(parents=True, exist_ok=True)
    path = _new_folder(runs, f"{start}_{job.job}")
    write_durably(path / JOB, freeze(job).encode("utf-8"))
    (path / "frames").mkdir()
    sync_folder(path)
    sync_folder(runs)
    return RunFolder(path.resolve(), job)


def _new_folder(runs: Path, name: str) -> Path:
    for attempt in range(1, MOST_ATTEMPTS):
        path = runs / (name if attempt == 1 else f"{name}-{attempt}")
        try:
            path.mkdir()
        except FileExistsError:
            continue
        return path
    raise RunRefused(runs / name, "too many runs of that name in this second")


def refuse_another_job(folder: RunFolder, known: str | None) -> None:
    """RunRefused unless ``known`` (as the journal has it) is job.yaml's fingerprint."""
    if known not in (None, fingerprint(folder.job)):
        raise RunRefused(
            folder.path,
            f"{JOB} is not the job with which this run began",
            f"put the original {JOB} back, or sweep anew",
        )


def is_run_folder(path: Path) -> bool:
    """Whether ``path`` looks like a run: a folder with a frozen job."""
    return (path / JOB).is_file()


def open_run_folder(path: Path) -> RunFolder:
    """The run at ``path``. Raises RunRefused, or SettingsRefused for a bad job.yaml."""
    if not path.exists():
        raise RunRefused(path, "no such run folder", "give a folder under runs/")
    if not is_run_folder(path):
        raise RunRefused(path, f"not a run folder: there is no {JOB} in it")
    frozen = path / JOB
    try:
        text = frozen.read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        raise RunRefused(frozen, f"cannot be read ({error})") from None
    return RunFolder(path.resolve(), thaw(text, str(frozen)))
