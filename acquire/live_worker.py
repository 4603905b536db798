"""The process that fits a running sweep's spots; its parent asks by line. Acts.

    python -m pitchsweep.acquire.live_worker RUN

For every number on its standard input the fit of all steps before that number, as one
line of JSON ("null" where there is no result yet). It ends with its input, and leaves
the processor to the sweep: a fit in the sweep's own process would hold up the
heartbeat on a busy computer.
"""

import json
import os
import sys
from contextlib import suppress
from pathlib import Path
from typing import Any

from pitchsweep.acquire.acquire_errors import AcquireError
from pitchsweep.acquire.journal_file import open_journal
from pitchsweep.acquire.measured_state import measure
from pitchsweep.acquire.run_folder import RunFolder, open_run_folder
from pitchsweep.acquire.run_table import inputs_from_run, record_of
from pitchsweep.acquire.sweep_plan import SweepPlan, plan_sweep
from pitchsweep.analysis.analysis_errors import AnalysisError
from pitchsweep.configs.fingerprint import fingerprint

NICE = 10


def fitted(folder: RunFolder, plan: SweepPlan, before: int) -> dict[str, Any] | None:
    """What the steps before ``before`` say; None where they say nothing yet."""
    with suppress(AnalysisError, AcquireError, ValueError):
        with open_journal(folder.journal, read_only=True) as journal:
            record = record_of(folder, plan, journal, before=before)
        # Of a lot the part that is being swept, once it has been seen.
        given = inputs_from_run(record)[-1]
        result = measure(given, advise=False)
        return {
            "part": f"{given.part.part}, serial {given.part.serial}",
            "pitch_nm": float(result.pitch_nm),
            "u_pitch_nm": float(result.u_pitch_nm),
            "jumps": [vars(jump) for jump in result.jumps],
            "warnings": list(result.warnings),
        }
    return None


def main() -> int:
    """Answers until its input ends."""
    os.nice(NICE)
    folder = open_run_folder(Path(sys.argv[1]))
    plan = plan_sweep(folder.job, fingerprint(folder.job))
    for line in sys.stdin:
        print(json.dumps(fitted(folder, plan, int(line))), flush=True)
    return 0


if __name__ == "__main__":
    sys.exit(main())
