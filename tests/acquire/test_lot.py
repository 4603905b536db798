"""A lot: parts seated in turn in one run, references before and after them."""

import json
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from acquire_fakes import FakeBench, Killed, QuietProgress, opener, small_job
from lots import job_with_lot, lot_job

from pitchsweep.acquire.acquire_errors import RunRefused
from pitchsweep.acquire.analyse_run import analyse, write_derived
from pitchsweep.acquire.bench_devices import BenchDevices
from pitchsweep.acquire.bench_opening import open_bench
from pitchsweep.acquire.bench_watch import Sensed, after_reading
from pitchsweep.acquire.fit_sources import FitOptions, read_sources
from pitchsweep.acquire.journal_file import open_journal
from pitchsweep.acquire.run_table import (
    input_from_run,
    input_of_part,
    read_run,
    whole_input,
)
from pitchsweep.acquire.sweep_plan import plan_sweep
from pitchsweep.acquire.sweep_session import BenchRequest, resume_run, sweep_job
from pitchsweep.analysis.analysis_errors import NoResult
from pitchsweep.analysis.lot_parts import lot_lines
from pitchsweep.analysis.order_table_file import write_order_table
from pitchsweep.analysis.result_file import result_json
from pitchsweep.configs.job_model import Job
from pitchsweep.drivers.devices import AirReading, BenchReading

SHIM = small_job().part
SHORT = job_with_lot(
    small_job(start_deg=-10.0, stop_deg=10.0, step_deg=10.0),
    lot_job().lot[0],
    SHIM,
    SHIM.model_copy(update={"place": "edge"}),
    lot_job().lot[0],
)
COARSE = lot_job(step_deg=5.0)
"""The shipped lot with a fifth of its steps."""


def test_the_plan_takes_part_after_part_each_with_all_mounts() -> None:
    job = lot_job(
        mounts_deg=(0.0, 180.0), start_deg=-30.0, stop_deg=30.0, step_deg=10.0
    )
    plan = plan_sweep(job, "any")
    seats = list(dict.fromkeys((s.part, s.mount, s.mount_deg) for s in plan.steps))
    assert seats == [(n // 2, n, 180.0 * (n % 2)) for n in range(8)]
    assert [s.step for s in plan.steps] == list(range(8 * 7))
    assert [(c.part, c.mount) for c in plan.zero_checks] == [s[:2] for s in seats]
    assert [job.part_in(s.mount) for s in plan.steps] == [
        job.lot[s.part] for s in plan.steps
    ]
    assert plan.steps[-1].planned_s > 7 / 8 * plan.duration_s


def test_a_person_exchanges_the_parts_in_the_dark(tmp_path: Path) -> None:
    fake, progress = FakeBench(SHORT), QuietProgress()
    run = sweep_job(SHORT, tmp_path, progress, opener(fake)).path
    assert fake.asked == [
        "seat shim-830, serial 7, centre",
        "seat shim-830, serial 7, edge",
        "seat reference-740, serial R1, centre",
    ]
    assert any("the first part is reference-740" in said for said in progress.said)
    assert [s.part for s in progress.shown[2:4]] == [
        "reference-740, serial R1, centre",
        "shim-830, serial 7, centre",
    ]
    said = json.loads((run / "status.json").read_text())
    assert said["part"] == "reference-740, serial R1, centre"
    with open_journal(run / "run.db", read_only=True) as journal:
        facts = journal.meta()
    assert facts["part_in_mount_2"] == "shim-830, serial 7, edge"


def outcome(run: Path) -> str:
    return write_order_table(whole_input(read_run(run)).table)


def test_killed_at_every_exchange_and_resumed_nothing_is_of_another_part(
    tmp_path: Path,
) -> None:
    whole = FakeBench(SHORT)
    same = outcome(
        sweep_job(SHORT, tmp_path / "whole", QuietProgress(), opener(whole)).path
    )
    near = [
        n
        for n, what in enumerate(whole.log, 1)
        if what.startswith(("person", "seat")) or n in (2, 30, whole.calls)
    ]
    for n in near:
        runs = tmp_path / f"n{n}"
        with pytest.raises(Killed):
            fake = FakeBench(SHORT, fail_at=n)
            sweep_job(SHORT, runs, QuietProgress(), opener(fake))
        (run,) = runs.iterdir()
        with open_journal(run / "run.db", read_only=True) as journal:
            before = {r.intent for r in journal.intents() if r.outcome == "done"}
        resume_run(run, QuietProgress(), opener(FakeBench(SHORT)))
        assert outcome(run) == same, f"killed at call {n}"
        with open_journal(run / "run.db", read_only=True) as journal:
            assert before <= {
                r.intent for r in journal.intents() if r.outcome == "done"
            }


def test_a_first_step_taken_up_late_has_its_part_seated_again(tmp_path: Path) -> None:
    whole = FakeBench(SHORT)
    sweep_job(SHORT, tmp_path / "whole", QuietProgress(), opener(whole))
    last = len(whole.log) - whole.log[::-1].index("person")
    with pytest.raises(Killed):
        fake = FakeBench(SHORT, fail_at=last)
        sweep_job(SHORT, tmp_path / "cut", QuietProgress(), opener(fake))
    (run,) = (tmp_path / "cut").iterdir()
    with open_journal(run / "run.db") as journal:
        first = next(r for r in journal.intents() if r.kind == "step")
        journal.void(first.intent, "skipped")
    fake = FakeBench(SHORT)
    resume_run(run, QuietProgress(), opener(fake))
    assert fake.asked[0].startswith("seat reference-740, serial R1, centre, or leave")
    assert outcome(run) == outcome(next((tmp_path / "whole").iterdir()))


def test_another_part_is_no_change_of_temperature() -> None:
    def reading(part_C: float) -> BenchReading:
        return BenchReading(AirReading(20.0, 1013.0, 50.0, part_C))

    job = lot_job()
    first, later = (
        next(s for s in plan_sweep(job, "any").steps if s.part == part)
        for part in (0, 1)
    )
    about = {"bench": job.bench, "part": job.part}
    state = after_reading(Sensed(), reading(20.0), step=first, **about).state
    there = after_reading(state, reading(22.0), step=later, **about)
    assert there.warning == ""
    moved = after_reading(there.state, reading(22.6), step=later, **about)
    assert "part temperature moved by +0.60 K" in moved.warning


@dataclass(frozen=True)
class Swept:
    """The shipped lot with fewer steps, swept on its twin, with its files."""

    run: Path
    truth: dict[str, Any]
    result: dict[str, Any]


@pytest.fixture(scope="module")
def swept(tmp_path_factory: pytest.TempPathFactory) -> Swept:
    runs = tmp_path_factory.mktemp("lot")
    run = sweep_job(COARSE, runs, QuietProgress(), open_bench).path
    truth = json.loads((run / "twin" / "twin_truth.json").read_text())
    shutil.rmtree(run / "twin")
    write_derived(analyse(read_sources([run], FitOptions())), run)
    return Swept(run, truth, json.loads((run / "result.json").read_text()))


def test_every_part_has_its_pitch_the_diode_has_no_say_in_it(swept: Swept) -> None:
    true_nm = {p["serial"]: p["pitch_nm"] for p in swept.truth["parts"]}
    assert swept.truth["pitch_nm"] == true_nm["7"] != true_nm["8"]
    assert abs(true_nm["R1"] - 740.115) < 4 * 0.003
    first, second = swept.result["parts"]
    assert (first["serial"], second["serial"]) == ("7", "8")
    assert second["place"] == "near-the-edge"
    for part in (first, second):
        off_nm = part["pitch_nm"] - true_nm[part["serial"]]
        assert abs(off_nm) < 3.0 * part["u_pitch_nm"]
        # What the data sheet of the diode alone would leave: 0.5 nm of 635 nm.
        assert part["u_pitch_nm"] / part["pitch_nm"] < 0.2 * 0.5 / 635.0
        lines = {line["source"]: line["u_nm"] for line in part["budget"]}
        assert lines["laser wavelength"] < 0.5 * part["u_pitch_nm"]
        assert lines["pitch of the reference"] > 0.0
        assert part["decision"] == "conforms" and part["warnings"] == []
    (red,) = swept.result["wavelengths"]
    off_nm = red["vacuum_nm"] - swept.truth["vacuum_wavelength_nm"]["red"]
    assert abs(off_nm) < 3.0 * red["u_nm"] < 0.5


def test_the_first_part_has_the_result_as_ever_and_drift_over_the_whole_run(
    swept: Swept,
) -> None:
    first = swept.result["parts"][0]
    for key in ("part", "serial", "pitch_nm", "u_pitch_nm", "U_pitch_nm", "decision"):
        assert swept.result[key] == first[key]
    drifts = [
        n["name"] for n in swept.result["nuisance"] if "wavelength drift" in n["name"]
    ]
    assert drifts == [
        "wavelength drift of red, linear",
        "wavelength drift of red, bent",
    ]
    table = input_from_run(read_run(swept.run)).table
    assert table.part is not None and table.time_s is not None
    reference = table.time_s[table.part == 1]
    part = table.time_s[table.part == 0]
    assert reference.min() < part.min() and part.max() < reference.max()
    assert len(np.unique(table.mount_deg[table.part == 1])) == 2


def test_every_spot_has_its_order_and_every_report_names_every_part(
    swept: Swept,
) -> None:
    rows = (swept.run / "orders.csv").read_text().splitlines()[1:]
    seats = {float(row.split(",")[2]) for row in rows if row.split(",")[4]}
    assert seats == {0.0, 360.0, 720.0, 1080.0}
    page = (swept.run / "report.html").read_text()
    assert "Parts of this run" in page and "near-the-edge" in page
    assert "reference, 740.115 nm" in page
    analysed = analyse(read_sources([swept.run], FitOptions()))
    assert json.loads(result_json(analysed.result, analysed.lot)) == swept.result
    lines = lot_lines(analysed.lot)
    assert len(lines) == 2 and "serial 8, near-the-edge: " in lines[1]
    assert "conforms" in lines[1]


def test_a_lot_is_fitted_by_itself(swept: Swept) -> None:
    sources = read_sources([swept.run], FitOptions())
    with pytest.raises(RunRefused, match="a run of a lot"):
        analyse([*sources, *sources])


def test_a_lot_cut_short_says_which_part_has_no_result(swept: Swept) -> None:
    record = read_run(swept.run)
    job = record.folder.job

    def until(mount: int, steps: int = 0) -> Any:
        kept = [s for s in record.steps if s.row.mount < mount]
        kept += [s for s in record.steps if s.row.mount == mount][:steps]
        return replace(record, steps=tuple(kept))

    with pytest.raises(NoResult, match="no step of shim-830, serial 7, centre"):
        input_from_run(until(1))
    (source,) = read_sources([swept.run], FitOptions())
    cut = until(2, steps=1)
    others = (input_of_part(cut, job.lot[2]),)
    found = analyse(
        [replace(source, run=cut, given=input_from_run(cut), others=others)]
    )
    assert len(found.lot) == 1
    assert any("no result for shim-830-second" in w for w in found.result.warnings)
    assert any("incomplete" in w for w in found.result.warnings)


class KilledAtExchange:
    """A world in which the controller dies when the part was exchanged."""

    def __init__(self, world: Any, exchanges: int) -> None:
        self._world = world
        self._left = exchanges

    def __getattr__(self, name: str) -> Any:
        return getattr(self._world, name)

    def ask_person(self, what: str) -> str:
        self._left -= 1
        who = str(self._world.ask_person(what))
        if self._left == 0:
            raise Killed
        return who


def test_killed_while_parts_are_exchanged_on_the_twin(
    swept: Swept, tmp_path: Path
) -> None:
    """The twin comes up with the first part in; the person seats the right one."""

    @contextmanager
    def dying(request: BenchRequest) -> Iterator[BenchDevices]:
        with open_bench(request) as devices:
            yield replace(devices, world=KilledAtExchange(devices.world, 2))

    job: Job = COARSE
    with pytest.raises(Killed):
        sweep_job(job, tmp_path, QuietProgress(), dying)
    run = next(p for p in tmp_path.iterdir() if p.is_dir())
    progress = QuietProgress()
    resume_run(run, progress, open_bench)
    asked = "seat shim-830-second, serial 8, near-the-edge, or leave it as it sits"
    assert any(asked in said for said in progress.said)
    assert outcome(run) == outcome(swept.run)
