"""The gate against a five-line model in 10 000 random sequences of 40 events.

``python tests/benchmarks/gate_sequences.py [SEQUENCES]``. The suite plays 500.
"""

import sys
import time
from pathlib import Path

from hypothesis import settings
from hypothesis.stateful import run_state_machine_as_test

sys.path.insert(0, str(Path(__file__).parent.parent / "safety"))

from test_gate_properties import GateAgainstModel  # noqa: E402


def main() -> None:
    sequences = int(sys.argv[1]) if len(sys.argv) > 1 else 10_000
    began_s = time.monotonic()
    run_state_machine_as_test(
        GateAgainstModel,
        settings=settings(
            max_examples=sequences,
            stateful_step_count=40,
            deadline=None,
            derandomize=True,
            database=None,
        ),
    )
    took_s = time.monotonic() - began_s
    print(
        f"{sequences} sequences of up to 40 events agree with the model: {took_s:.0f} s"
    )


if __name__ == "__main__":
    main()
