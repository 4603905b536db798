"""A controller that lights step 1 and waits to be killed.

Reads the guard's configuration on stdin, prints the guard's process number once lit.
"""

import json
import sys
import threading

from pitchsweep.safety.guard_client import start_guard
from pitchsweep.safety.guard_config import config_from_mapping

guard = start_guard(config_from_mapping(json.loads(sys.stdin.readline())))
guard.arm()
guard.light_on(1, 0.0, 0.0)
print(guard.pid, flush=True)
threading.Event().wait(60.0)
