"""The controller dies, and the twin is the witness: dark, state kept, then gone.

These tests wait on the real clock: the unit's keep-alive and the 5 s that the twin
stays belong to safety time, which is never scaled.
"""

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

from twin_bench import running_twin, small_job, unit_log

from pitchsweep.drivers.twin.kept_state import read_state
from pitchsweep.drivers.twin_launcher import start_twin

CONTROLLER = """
import sys, threading
from pathlib import Path
from twin_bench import light_anew, running_twin
with running_twin(Path(sys.argv[1])) as twin:
    twin.stage.home()
    twin.stage.move_to(12.0)
    def hold():
        while True:
            light_anew(twin.unit)
            threading.Event().wait(0.02)
    threading.Thread(target=hold, daemon=True).start()
    print(twin.handle.process.pid, flush=True)
    threading.Event().wait()
"""


def _killed_controller(directory: Path) -> tuple[int, float]:
    """Kills a controller's process group while it holds the light.

    Returns the twin's process id and the monotonic time of the kill.
    """
    paths = [str(Path(__file__).parent.parent), os.environ.get("PYTHONPATH", "")]
    controller = subprocess.Popen(
        [sys.executable, "-c", CONTROLLER, str(directory)],
        stdout=subprocess.PIPE,
        text=True,
        start_new_session=True,
        env={**os.environ, "PYTHONPATH": os.pathsep.join(filter(None, paths))},
    )
    assert controller.stdout is not None
    with controller.stdout:
        twin_pid = int(controller.stdout.readline())
    _wait_until(lambda: unit_log(directory)[-1]["value"] == "on", 5.0)
    killed_s = time.monotonic()
    os.killpg(controller.pid, signal.SIGKILL)
    controller.wait()
    return twin_pid, killed_s


def _wait_until(holds, limit_s: float) -> None:  # type: ignore[no-untyped-def]
    until_s = time.monotonic() + limit_s
    while not holds():
        assert time.monotonic() < until_s, "it never came true"
        time.sleep(0.01)


def _alive(pid: int) -> bool:
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return False
    state = Path(f"/proc/{pid}/stat").read_text().rsplit(")", 1)[1].split()[0]
    return state != "Z"


def test_a_killed_controller_leaves_dark_state_and_no_process(tmp_path: Path) -> None:
    twin_pid, killed_s = _killed_controller(tmp_path)
    _wait_until(lambda: unit_log(tmp_path)[-1]["value"] == "off", 2.0)
    dark = unit_log(tmp_path)[-1]
    assert dark["why"] == "keep-alive ran out"
    assert dark["monotonic_s"] - killed_s <= 0.25
    assert _alive(twin_pid)
    _wait_until(lambda: not _alive(twin_pid), 10.0)
    end = unit_log(tmp_path)[-1]
    assert (end["what"], end["value"]) == ("unit", "end")
    assert 5.0 <= end["monotonic_s"] - killed_s <= 7.0
    kept = read_state(tmp_path / "state.json")
    assert kept is not None and kept.stage.homed
    assert kept.stage.motor_deg == 12.0


def test_a_successor_goes_on_where_the_stage_stood(tmp_path: Path) -> None:
    twin_pid, killed_s = _killed_controller(tmp_path)
    with running_twin(tmp_path) as twin:
        dark = [row for row in unit_log(tmp_path) if row["value"] == "off"][-1]
        assert dark["monotonic_s"] - killed_s <= 0.25
        assert twin.handle.process.pid != twin_pid
        place = twin.stage.where()
        assert (place.angle_deg, place.homed) == (12.0, True)
        assert twin.world.now_s() > 0.0
        assert not twin.unit.state().light_on


def test_a_twin_that_is_told_to_end_leaves_at_once_and_dark(tmp_path: Path) -> None:
    job = small_job()
    handle = start_twin(tmp_path, job.bench, job.part, 1)
    begin_s = time.monotonic()
    assert handle.end() == 0
    assert time.monotonic() - begin_s < 3.0
    assert unit_log(tmp_path)[-1]["why"] == "ended by the controller"
    assert (tmp_path / "state.json").exists()


def test_a_terminated_twin_ends_in_the_dark(tmp_path: Path) -> None:
    job = small_job()
    handle = start_twin(tmp_path, job.bench, job.part, 1)
    os.kill(handle.process.pid, signal.SIGTERM)
    assert handle.process.wait(5.0) == 0
    assert unit_log(tmp_path)[-1]["why"] == "ended by a signal"
    assert handle.end() == 0
