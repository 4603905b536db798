"""A controller that lights step 1 and waits to be killed.

Reads the guard's configuration on stdin, prints the guard's process number once lit.
The door has been asked for in writing: a line each on stdout, before that number.
"""

import json
import sys
import threading

from pitchsweep.safety.guard_client import start_guard
from pitchsweep.safety.guard_config import config_from_mapping

POWER_MW = 0.9


class Asker:
    """Asks for the door by a line on stdout."""

    patience_s = 10.0

    def open_interlock(self) -> None:
        print("open", flush=True)

    def close_interlock(self) -> None:
        print("close", flush=True)


guard = start_guard(config_from_mapping(json.loads(sys.stdin.readline())))
guard.arm(Asker())
guard.light_on(1, 0.0, 0.0, POWER_MW)
print(guard.pid, flush=True)
threading.Event().wait(60.0)
