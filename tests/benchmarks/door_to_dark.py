"""Door opens -> dark, on the unit's own log: p50, p99 and maximum, both cores busy.

``python tests/benchmarks/door_to_dark.py [COUNT]``. The door is opened at moments drawn
from a seed; unit, guard and controller are three processes; as many more keep every
core busy.
"""

import multiprocessing
import os
import random
import sys
import tempfile
import time
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parent.parent))

from emulated_unit import EmulatedUnit  # noqa: E402
from guard_builders import KEY, POWER_MW, guard_config  # noqa: E402

from pitchsweep.drivers.dialect_files import shipped_dialect_mapping  # noqa: E402
from pitchsweep.safety.guard_client import GuardClient, start_guard  # noqa: E402


def spin() -> None:
    """Keeps one core busy."""
    while True:
        pass


def open_once(unit: EmulatedUnit, guard: GuardClient, wait_s: float) -> float:
    """Seconds from door to dark in one cycle of arm, light, door, acknowledge."""
    guard.arm(unit)
    guard.light_on(1, 0.0, 0.0, POWER_MW)
    time.sleep(wait_s)
    unit.tell("open")
    if not guard.tripped.wait(5.0):
        raise SystemExit("the open door was not seen within 5 s")
    unit.tell("close")
    unit.tell("reset")
    time.sleep(0.1)
    guard.acknowledge("benchmark")
    opened = [at for at, value, _ in unit.rows("door") if value == "open"]
    return unit.rows("light")[-1][0] - opened[-1]


def measure(count: int, folder: Path) -> list[float]:
    """Sorted latencies in seconds."""
    rng = random.Random(0)
    unit = EmulatedUnit(folder / "unit.log", KEY)
    dialect = shipped_dialect_mapping("emission-line")
    assert isinstance(dialect, dict)
    config = guard_config(
        port=unit.port,
        dialect=dialect,
        ledger=folder / "ledger.jsonl",
        utc_s=time.time(),
    )
    with start_guard(config) as guard:
        took = [open_once(unit, guard, rng.uniform(0.02, 0.12)) for _ in range(count)]
    unit.end()
    return sorted(took)


def main() -> None:
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 200
    cores = os.cpu_count() or 1
    spinners = [multiprocessing.Process(target=spin, daemon=True) for _ in range(cores)]
    for spinner in spinners:
        spinner.start()
    with tempfile.TemporaryDirectory() as folder:
        took = measure(count, Path(folder))
    for spinner in spinners:
        spinner.terminate()
    p50, p99 = took[count // 2], took[min(count - 1, int(0.99 * count))]
    print(f"door to dark, {count} openings, {cores} cores busy:")
    print(
        f"p50 {1e3 * p50:.1f} ms, p99 {1e3 * p99:.1f} ms, max {1e3 * took[-1]:.1f} ms"
    )


if __name__ == "__main__":
    main()
