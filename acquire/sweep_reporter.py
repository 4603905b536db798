"""Says what happens everywhere at once: journal, terminal, status, command. Acts."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

from pitchsweep.acquire.fault_policy import Reaction
from pitchsweep.acquire.journal_rows import GateRow
from pitchsweep.acquire.run_journal import RunJournal, utc_now
from pitchsweep.acquire.status_file import StatusFile
from pitchsweep.acquire.sweep_plan import Step
from pitchsweep.acquire.telling import Teller


@dataclass(frozen=True)
class SweepReporter:
    """Where news of a sweep goes."""

    journal: RunJournal
    say: Callable[[str], None]
    status: StatusFile
    teller: Teller

    def fault(self, step: Step, what: str, detail: str, does: Reaction) -> None:
        """A fault met at ``step`` and what is done about it."""
        words = what.replace("_", " ")
        self.journal.record_fault(words, detail, does.words, step.step)
        text = f"{words} at step {step.step}: {detail}; {does.words}"
        self.say(text)
        self.status.update(last_fault=text)
        self.teller.tell("fault", text, policy=does.words, step=step.step)

    def warning(self, step: Step | None, text: str) -> None:
        """Something to know, about which nothing is done."""
        number = None if step is None else step.step
        self.journal.record_fault("warning", text, "note", number)
        self.say(f"warning: {text}")
        self.teller.tell("fault", text, policy="note")

    def pause(self, text: str) -> None:
        """The sweep waits for a person, dark."""
        self.say(f"paused, dark: {text}")
        self.status.update(state="paused", waits_for=text)
        self.teller.tell("pause", text)

    def goes_on(self, step: Step | None, who: str, what: str) -> None:
        """A person did what was asked and said so."""
        number = None if step is None else step.step
        row = GateRow(utc_now(), number, "ready", "person", f"{who}: {what}")
        self.journal.record_gate(row)
        self.say(f"going on: {who} has done it ({what})")
        self.status.update(state="sweeping", waits_for=None)

    def state(self, state: str, **more: Any) -> None:
        """The sweep's state in ``status.json``."""
        self.status.update(state=state, **more)
