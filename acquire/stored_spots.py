"""Frames of acknowledged steps, read back as shots, and their spots. Acts (disk)."""

from pitchsweep.acquire.bench_devices import FindSpots, Shot
from pitchsweep.acquire.frame_store import FrameStore
from pitchsweep.acquire.journal_rows import FrameRow, IntentRow, StepSpots
from pitchsweep.acquire.run_journal import RunJournal
from pitchsweep.acquire.sweep_plan import Step
from pitchsweep.drivers.devices import Label


def light_shots(
    journal: RunJournal, store: FrameStore, row: IntentRow
) -> tuple[Shot, ...]:
    """The light frames of an acknowledged intent. Raises StorageFailed."""
    return _shots(store, journal.frames(row.intent), "light")


def dark_shots(
    journal: RunJournal, store: FrameStore, row: IntentRow | Step
) -> tuple[Shot, ...]:
    """The dark frames that serve a step. Raises StorageFailed.

    Those of the last step at or before it, of the same mount and laser, that has any;
    by step number and not by time, so that a resumed run takes the same ones.
    """
    serving = [
        other
        for other in journal.intents()
        if other.kind == "step"
        and other.outcome == "done"
        and other.step <= row.step
        and (other.mount, other.laser) == (row.mount, row.laser)
    ]
    for other in sorted(serving, key=lambda o: (o.step, o.intent), reverse=True):
        shots = _shots(store, journal.frames(other.intent), "dark")
        if shots:
            return shots
    return ()


def spots_of(
    journal: RunJournal, store: FrameStore, row: IntentRow, find: FindSpots
) -> StepSpots:
    """The recorded spots of an acknowledged intent, or found again in its frames.

    Raises StorageFailed when they must be found and a frame is missing or changed.
    """
    recorded = journal.spots(row.intent)
    if recorded is not None:
        return recorded
    lights = light_shots(journal, store, row)
    return find(row.step, lights, dark_shots(journal, store, row))


def _shots(store: FrameStore, rows: list[FrameRow], kind: str) -> tuple[Shot, ...]:
    return tuple(
        Shot(row.exposure_ms, label_of(row), store.read(row.file, row.sha256))
        for row in rows
        if row.kind == kind
    )


def label_of(row: FrameRow) -> Label:
    """The label with which a frame was taken."""
    return Label(
        mount=row.mount,
        laser=row.laser,
        repeat=row.repeat,
        step=row.step,
        exposure=row.exposure,
        planned_s=row.planned_s,
    )
