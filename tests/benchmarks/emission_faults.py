"""Every emission fault, again and again with every core busy; the unit's log judges.

``python tests/benchmarks/emission_faults.py [REPEATS] [DOORS]`` (4 and 100). Prints for
each fault the longest time to dark beside its bound, and for the opened door p50, p99
and maximum. Moments are drawn from a seed. Ends with code 1 when a bound was missed,
light came back, or anything went on without being acknowledged.
"""

import multiprocessing
import os
import random
import sys
import tempfile
import warnings
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parent.parent))

from door_to_dark import measure, spin  # noqa: E402
from faults.emission_judge import (  # noqa: E402
    CONTROLLER_FAULTS,
    Verdict,
    judge,
    judge_clock,
    judge_controller,
    judge_stuck_shutter,
)
from faults.emission_scenes import SCENES  # noqa: E402

from pitchsweep.safety.running_guards import FOLDER_VARIABLE  # noqa: E402

Judge = Callable[[Path, float], Verdict]


def campaign() -> dict[str, Judge]:
    """Name -> what plays it in a folder, so long after the light came on."""
    plays: dict[str, Judge] = {
        scene.name: lambda folder, wait_s, scene=scene: judge(  # type: ignore[misc]
            scene, folder, wait_s
        )
        for scene in SCENES
    }
    plays["clock set back"] = judge_clock
    for name in CONTROLLER_FAULTS:
        plays[name] = lambda folder, wait_s, name=name: judge_controller(  # type: ignore[misc]
            name, folder, wait_s
        )
    return plays


@contextmanager
def busy_cores() -> Iterator[int]:
    """Keeps every core busy inside the block; their number."""
    cores = os.cpu_count() or 1
    spinners = [multiprocessing.Process(target=spin, daemon=True) for _ in range(cores)]
    for spinner in spinners:
        spinner.start()
    try:
        yield cores
    finally:
        for spinner in spinners:
            spinner.terminate()
            spinner.join()


def play(name: str, judge_it: Judge, repeats: int, rng: random.Random) -> bool:
    """Plays a fault ``repeats`` times and prints a line; True when all of them hold."""
    found = []
    for _ in range(repeats):
        with tempfile.TemporaryDirectory() as folder:
            found.append(judge_it(Path(folder), rng.uniform(0.02, 0.4)))
    worst_s = max(verdict.dark_s for verdict in found)
    holds = all(verdict.holds for verdict in found)
    failed = sum(not verdict.holds for verdict in found)
    word = "dark each time" if holds else f"{failed} of {repeats} FAILED"
    print(
        f"{name:26} longest {1e3 * worst_s:6.1f} ms, bound"
        f" {1e3 * found[0].bound_s:4.0f} ms, {word}",
        flush=True,
    )
    return holds


def play_stuck_shutter() -> bool:
    """A light that outlasts 'dark' cannot be judged by darkness: it must latch."""
    holds = True
    for word in ("stick", "jam"):
        with tempfile.TemporaryDirectory() as folder:
            event, refused = judge_stuck_shutter(Path(folder), word)
        holds &= event == "light-stuck" and refused
        print(f"shutter stuck ({word:5})      {event}, light refused: {refused}")
    return holds


def main() -> int:
    repeats = int(sys.argv[1]) if len(sys.argv) > 1 else 4
    doors = int(sys.argv[2]) if len(sys.argv) > 2 else 100
    warnings.filterwarnings("ignore", category=DeprecationWarning)
    rng = random.Random(0)
    with tempfile.TemporaryDirectory() as guards, busy_cores() as cores:
        os.environ[FOLDER_VARIABLE] = guards
        print(f"{repeats} times each, {cores} cores kept busy")
        holds = [play(n, j, repeats, rng) for n, j in campaign().items()]
        holds.append(play_stuck_shutter())
        with tempfile.TemporaryDirectory() as folder:
            took = measure(doors, Path(folder))
    p50, p99 = took[doors // 2], took[min(doors - 1, int(0.99 * doors))]
    print(
        f"door to dark, {doors} openings: p50 {1e3 * p50:.1f} ms,"
        f" p99 {1e3 * p99:.1f} ms, max {1e3 * took[-1]:.1f} ms"
    )
    return 0 if all(holds) else 1


if __name__ == "__main__":
    sys.exit(main())
