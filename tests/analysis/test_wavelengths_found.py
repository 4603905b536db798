"""The wavelength of a laser as a result of its own: known part, unknown diode."""

import json

from builders import demo_job, twin_sweep

from pitchsweep.analysis.measure import measure_pitch
from pitchsweep.analysis.records import PitchResult
from pitchsweep.analysis.result_file import result_json, summary_lines
from pitchsweep.configs.part_model import Certified


def swept(*, certified: bool, seed: int = 2) -> tuple[PitchResult, float]:
    """A sweep with a diode known to 0.5 nm; result and true vacuum wavelength."""
    job = demo_job("shims-spots", recipe={"step_deg": 3.0})
    red = job.bench.lasers["red"].model_copy(update={"u_wavelength_nm": 0.5})
    bench = job.bench.model_copy(update={"lasers": {"red": red}})
    job = job.model_copy(update={"bench": bench})
    sweep = twin_sweep(job, seed)
    part = job.part
    if certified:
        known = Certified(
            pitch_nm=sweep.truth.pitch_nm, u_pitch_nm=0.004, certificate="invented"
        )
        part = part.model_copy(update={"certified": known})
    result = measure_pitch(sweep.table, bench=bench, part=part)
    return result, sweep.truth.vacuum_wavelength_nm["red"]


def test_a_known_part_tells_the_wavelength() -> None:
    result, true_nm = swept(certified=True)
    (found,) = result.wavelengths
    assert found.laser == "red" and found.u_prior_nm == 0.5
    assert found.u_nm < 0.2
    assert abs(found.vacuum_nm - true_nm) < 4.0 * found.u_nm
    assert any(line.startswith("Wavelength red: ") for line in summary_lines(result))
    (written,) = json.loads(result_json(result))["wavelengths"]
    assert written["vacuum_nm"] == found.vacuum_nm


def test_an_unknown_part_tells_no_wavelength() -> None:
    result, _ = swept(certified=False)
    assert result.wavelengths == ()
