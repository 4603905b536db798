"""How a session ended: its journal row, who is told, the error to show. Acts."""

import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager, suppress

from pitchsweep.acquire.acquire_errors import FaultMet, StorageFailed, SweepStopped
from pitchsweep.acquire.frame_store import NO_SPACE
from pitchsweep.acquire.run_folder import RunFolder
from pitchsweep.acquire.stop_signals import StopRequested, StopSignals
from pitchsweep.acquire.sweep_reporter import SweepReporter
from pitchsweep.configs.typed_command import typed
from pitchsweep.drivers.driver_errors import DriverError
from pitchsweep.safety.safety_errors import SafetyError


@contextmanager
def ending(
    folder: RunFolder, session: int, stop: StopSignals, report: SweepReporter
) -> Iterator[None]:
    """Turns what ended a session into its journal row and the error to show."""
    end = _Ending(folder, session, report)
    try:
        yield
        end.well()
    except StopRequested as error:
        end.stopped(str(error))
        raise SweepStopped(folder.path, str(error)) from None
    except (StorageFailed, sqlite3.OperationalError, OSError) as error:
        end.stopped(first_line(error))
        if isinstance(error, StorageFailed) and not _out_of_space(error):
            raise
        raise SweepStopped(folder.path, _with_advice(error)) from error
    except (SafetyError, DriverError, FaultMet) as error:
        # What breaks after a request to stop is a consequence of it.
        if stop.reason:
            end.stopped(stop.reason)
            raise SweepStopped(folder.path, stop.reason) from None
        if isinstance(error, FaultMet) and error.kind == "disk_low":
            end.stopped(str(error))
            raise SweepStopped(folder.path, _with_advice(error)) from None
        end.broken(error)
        raise
    except BaseException as error:
        end.note(f"broke off: {type(error).__name__}: {error}")
        raise
    finally:
        report.teller.end()


class _Ending:
    """Writes an ending wherever it belongs; a full disk keeps it from nobody else."""

    def __init__(self, folder: RunFolder, session: int, report: SweepReporter) -> None:
        self._folder = folder
        self._session = session
        self._report = report

    def well(self) -> None:
        self._report.state("done")
        self._report.teller.tell("finish", "the sweep is complete")

    def stopped(self, why: str) -> None:
        self.note(f"stopped: {why}")
        self._report.state("stopped", reason=why)
        self._report.teller.tell("stop", why)

    def broken(self, error: BaseException) -> None:
        tripped = isinstance(error, SafetyError)
        what = "tripped" if tripped else "device fault"
        # Faults of devices that have a policy are in the journal already.
        if tripped or not self._just_noted(error):
            with suppress(sqlite3.Error):
                self._report.journal.record_fault(what, first_line(error), "stop")
        self.note(f"{what}: {first_line(error)}")
        self._report.state(what.replace(" ", "-"), reason=first_line(error))
        self._report.teller.tell("trip" if tripped else "fault", first_line(error))
        if tripped or self._folder.job.bench.ports is not None:
            # A guard of a real bench that has ended is acknowledged like a trip.
            ack = typed("ack", self._folder.path)
            resume = typed("sweep", "--resume", self._folder.path)
            self._report.say(f"look at the bench, then: {ack}\nand then: {resume}")
        else:
            resume = typed("sweep", "--resume", self._folder.path)
            self._report.say(f"dark; when it is mended go on with: {resume}")

    def note(self, how: str) -> None:
        # The disk may be full: the session then shows no ending, which says it too.
        with suppress(sqlite3.Error):
            self._report.journal.end_session(self._session, how)

    def _just_noted(self, error: BaseException) -> bool:
        with suppress(sqlite3.Error):
            noted = self._report.journal.faults()
            detail = error.detail if isinstance(error, FaultMet) else str(error)
            return bool(noted) and noted[-1].detail == " ".join(detail.split())
        return False


def first_line(error: BaseException) -> str:
    """The first line of what an error says."""
    return str(error).splitlines()[0] if str(error) else type(error).__name__


def _with_advice(error: BaseException) -> str:
    text = first_line(error)
    full = "full" in text or "space" in text or "free" in text
    return f"{text}; make space on that disk" if full else text


def _out_of_space(error: StorageFailed) -> bool:
    cause = error.__cause__
    return isinstance(cause, OSError) and cause.errno in NO_SPACE
