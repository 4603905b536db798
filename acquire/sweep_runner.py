"""The sweep itself: a loop short enough to read aloud. This module acts (devices)."""

from collections.abc import Callable

from pitchsweep.acquire.acquire_errors import FaultMet
from pitchsweep.acquire.bench_devices import BenchDevices
from pitchsweep.acquire.exposures import Exposures
from pitchsweep.acquire.fault_policy import fault_kind, reaction
from pitchsweep.acquire.resume import Standing
from pitchsweep.acquire.shown_steps import part_named
from pitchsweep.acquire.step_keeper import StepKeeper
from pitchsweep.acquire.step_taker import StepTaker, SweepContext
from pitchsweep.acquire.sweep_plan import Step, group_of
from pitchsweep.drivers.driver_errors import DriverError


class SweepRunner:
    """Takes the remaining steps of a run, one after the other."""

    def __init__(
        self, context: SweepContext, devices: BenchDevices, keeper: StepKeeper
    ) -> None:
        self._context = context
        self._devices = devices
        self._keeper = keeper
        self._exposures = Exposures(devices.camera, context.job.bench.camera)
        self._taker = StepTaker(context, devices, keeper, self._exposures)
        self._group: tuple[int, int, str] | None = None
        self._laser = ""
        self._begun = False

    def run(self, standing: Standing) -> None:
        """Homes, checks the zero order, takes every remaining step; dark at the end.

        Faults are met as the recipe says. Raises StopRequested, GateTripped,
        DriverError, FaultMet, StorageFailed; the gate was asked for dark by then.
        """
        with self._exposures:
            self._run(standing)

    def _run(self, standing: Standing) -> None:
        self._find_what_was_not_found(standing)
        # A first step that was skipped is taken up when another part may be in.
        self._begun = bool(standing.done)
        try:
            self._devices.gate.dark()
            self._meeting_faults(standing.remaining[0], self._devices.stage.home)
            for step in standing.remaining:
                begins = group_of(step) != self._group
                if begins:
                    self._finish()
                self._meet_jumps(step)
                if why := self._context.why_over(step):
                    self._end_early(why)
                    break
                if begins:
                    self._begin_group(step)
                self._take(step, step.first_frame)
                self._retake()
            self._finish()
        finally:
            self._devices.gate.dark()

    def _finish(self) -> None:
        self._drain()
        while self._retake():
            self._drain()

    def _drain(self) -> None:
        self._taker.wait_for_frames()
        self._keeper.drain()

    def _end_early(self, why: str) -> None:
        self._context.journal.set_meta("ended_early", why)
        self._context.report.say(f"the sweep ends here: {why}")

    def _meet_jumps(self, step: Step) -> None:
        """Meets jumps of the wavelength as the recipe says; the fit carries the rest.

        Skipped: every step since the jump is left out. Taken again: those of them that
        need no person to seat the part.
        """
        for jump in self._context.jumps(step):
            fault = FaultMet("laser_jump", jump.detail)
            does = self._react(jump.first, fault, 0)
            if does not in ("skip", "retry", "re-home"):
                continue
            self._drain()
            for row in self._context.journal.intents():
                since = jump.first.step <= row.step < step.step
                same = row.laser == jump.laser and row.kind == "step"
                if since and same and row.outcome == "done":
                    self._context.journal.void(row.intent, str(fault))
            for old in self._context.plan.steps[jump.first.step : step.step]:
                again = does != "skip" and old.laser == jump.laser
                if again and group_of(old) == self._group:
                    self._take(old, None)

    def _find_what_was_not_found(self, standing: Standing) -> None:
        """Finds spots of steps that an earlier session kept but had no time for."""
        for row in standing.done.values():
            if self._context.journal.spots(row.intent) is None:
                self._keeper.find_again(row)

    def _begin_group(self, step: Step) -> None:
        """Seats the part, then waits until the zero order was found where it should."""
        if self._group is None or self._group[0] != step.mount:
            self._seat(step)
        self._let_through(step)
        self._group = group_of(step)
        self._check_zero(step)

    def _seat(self, step: Step) -> None:
        world, report = self._devices.world, self._context.report
        job = self._context.job
        first = step.step == 0 and not self._begun
        if job.lot and first:
            report.say(f"the first part is {part_named(job, step)}: it must be in")
        elif not first and (job.lot or len(job.recipe.mounts_deg) > 1):
            self._ask_person(step, self._seating_words(step))
        world.seat_part(step.mount, step.mount_deg, step.face_deg, step.part)
        report.state("sweeping", mount=step.mount + 1)

    def _seating_words(self, step: Step) -> str:
        job = self._context.job
        what = f"seat {part_named(job, step) or 'the part'}"
        if job.lot and self._group is None:
            # Taken up again: seated anew it would sit otherwise than at the steps done.
            what += ", or leave it as it sits if it is in"
        if len(job.recipe.mounts_deg) > 1:
            what += f" for mount {step.mount + 1}, {step.mount_deg:g} deg"
        if any(job.recipe.faces_deg):
            what += f", turned in its own plane by {step.face_deg:g} deg"
        return what

    def _let_through(self, step: Step) -> None:
        """On a real bench with several lasers a person changes them, in the dark."""
        several = len(self._context.job.recipe.lasers) > 1
        if self._devices.lasers_by_hand and several and step.laser != self._laser:
            what = f"let laser '{step.laser}' alone through to the shutter"
            self._ask_person(step, what)
        self._laser = step.laser

    def _ask_person(self, step: Step, what: str) -> None:
        """Waits, dark, until a person has done ``what`` and said so."""
        self._devices.gate.dark()
        self._context.report.pause(what)
        who = self._devices.world.ask_person(what)
        self._context.stop.check()
        self._context.report.goes_on(step, who, what)

    def _check_zero(self, step: Step) -> None:
        self._take(self._context.plan.zero_check_for(step), None)
        self._keeper.drain()

    def _retake(self) -> bool:
        """Meets what was found wrong with steps behind us; whether there was anything.

        A step without its frames is taken again unless it is to be skipped; one with
        strange spots is kept where the recipe does not say otherwise.
        """
        found = [*self._taker.take_lost(), *self._keeper.take_faults()]
        for spoilt in found:
            does = self._react(spoilt.step, spoilt.fault, spoilt.tries)
            again = does != "skip" if spoilt.lost else does in ("retry", "re-home")
            if not spoilt.lost and (again or does == "skip"):
                why = " ".join(str(spoilt.fault).split())
                self._context.journal.void(spoilt.intent, why)
            if again and group_of(spoilt.step) == self._group:
                self._take(spoilt.step, None, spoilt.tries + 1, does == "re-home")
        return bool(found)

    def _take(
        self,
        step: Step,
        first_frame: int | None,
        tries: int = 0,
        home_first: bool = False,
    ) -> bool:
        """Takes a step, meeting faults as the recipe says; whether it was taken."""
        return self._meeting_faults(
            step, lambda: self._taker.take(step, first_frame, tries), home_first
        )

    def _meeting_faults(
        self, step: Step, act: Callable[[], None], home_first: bool = False
    ) -> bool:
        tries = 0
        while True:
            try:
                if home_first:
                    self._home_again(step)
                act()
                return True
            except (DriverError, FaultMet) as error:
                # What breaks after a request to stop is a consequence of it.
                self._context.stop.check()
                self._devices.gate.dark()
                does = self._react(step, error, tries)
            if does == "skip":
                return False
            home_first = does == "re-home"
            tries += 1

    def _react(self, step: Step, error: Exception, tries: int) -> str:
        """Says what is done about ``error``; raises it where that is stop.

        A pause is over when this returns: a person did what they were asked.
        """
        kind = fault_kind(error)
        if kind is None:
            raise error
        does = reaction(self._context.job.recipe.faults, kind, tries)
        text = error.detail if isinstance(error, FaultMet) else str(error)
        self._context.report.fault(step, kind, " ".join(text.split()), does)
        if does.does == "stop":
            raise error
        if does.does == "pause":
            self._ask_person(step, f"look at the bench: {kind.replace('_', ' ')}")
        return does.does

    def _home_again(self, step: Step) -> None:
        """Searches the zero in the dark; the zero order is checked after it."""
        self._keeper.drain()
        self._devices.gate.dark()
        self._devices.stage.home()
        if step.kind == "step" and self._group is not None:
            self._check_zero(step)
