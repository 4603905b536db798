"""Track pitches of disc standards, measured on the twin.

DVD 0.74 um: ECMA-267 10.6.2, verbatim quote seen (V). CD 1.6 um: ECMA-130, seen in a
secondary page (S; clause M). 0.32 um: ISO/IEC 30190, from memory (M).
"""

import numpy as np
import pytest
from builders import demo_job, twin_sweep

from pitchsweep.analysis.measure import measure_pitch
from pitchsweep.analysis.order_visibility import visible_orders

DISCS = [
    (pitch, colour)
    for pitch in (1600, 740, 320)
    for colour in ("red", "green", "violet")
    if (pitch, colour) != (320, "red")
]


@pytest.mark.parametrize(("pitch_nm", "colour"), DISCS)
def test_disc_pitch_is_measured_within_three_u(pitch_nm: int, colour: str) -> None:
    """At 635, 532.2 and 405 nm; 320 nm shows no order at 635 nm."""
    job = demo_job(f"track-{pitch_nm}-{colour}", twin={"pitch_off_percent": 0.0})
    for seed in (0, 1):
        sweep = twin_sweep(job, seed)
        assert sweep.truth.pitch_nm == pytest.approx(pitch_nm, rel=1e-12)
        result = measure_pitch(sweep.table, bench=job.bench, part=job.part)
        assert abs(result.pitch_nm - pitch_nm) < 3.0 * result.u_pitch_nm
        assert result.u_pitch_nm < 5e-4 * pitch_nm


@pytest.mark.parametrize(
    ("pitch_nm", "colour", "highest"),
    [
        # Common practice, no source; m lambda < d by hand, 3 * 532.2 = 1596.6.
        (1600, "red", 2),
        (1600, "green", 3),
        (1600, "violet", 3),
        (740, "red", 1),
        (740, "green", 1),
        (740, "violet", 1),
        (320, "red", 0),
        (320, "green", 0),
        (320, "violet", 0),
    ],
)
def test_orders_that_leave_at_normal_incidence(
    pitch_nm: int, colour: str, highest: int
) -> None:
    job = demo_job(f"track-{pitch_nm}-{colour}")
    view = visible_orders(job.bench, job.part, colour, 0.0)
    leaving = view.orders[view.leaves[0]]
    np.testing.assert_array_equal(leaving, np.arange(-highest, highest + 1))
