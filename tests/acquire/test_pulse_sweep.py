"""A whole sweep over a pulse-fed relay, with two interlock channels."""

import io
import json
from pathlib import Path

from builders import demo_job

from pitchsweep.acquire.bench_session import open_twin_bench
from pitchsweep.acquire.progress import progress_for
from pitchsweep.acquire.sweep_session import sweep_job


def test_a_sweep_runs_over_a_pulse_fed_relay(tmp_path: Path) -> None:
    job = demo_job("shims-spots")
    changes = {"line": "pulses", "interlock_channels": 2}
    job = demo_job(
        "shims-spots",
        bench={"emission": job.bench.emission.model_copy(update=changes)},
        recipe={"start_deg": -20.0, "stop_deg": 20.0, "step_deg": 8.0},
    )
    folder = sweep_job(job, tmp_path, progress_for(io.StringIO()), open_twin_bench)
    rows = map(json.loads, (folder.twin / "unit.log").read_text().splitlines())
    light = [row["value"] for row in rows if row["what"] == "light"]
    assert light == ["on", "off"] * 7  # the zero check and six steps
    ledger = folder.ledger.read_text()
    assert "interlock opened and closed" in ledger and 'acknowledged":false' in ledger
