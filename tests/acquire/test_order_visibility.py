"""The nominal grating equation against numbers worked out by hand."""

import numpy as np
import pytest
from acquire_fakes import small_job

from pitchsweep.analysis.order_visibility import visible_orders, why_no_order
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part


def with_pitch(pitch_nm: float, wave_nm: float) -> tuple[Bench, Part]:
    job = small_job()
    laser = job.bench.lasers["red"].model_copy(update={"vacuum_wavelength_nm": wave_nm})
    bench = job.bench.model_copy(update={"lasers": {"red": laser}})
    return bench, job.part.model_copy(update={"nominal_pitch_nm": pitch_nm})


def test_normal_incidence_by_hand() -> None:
    # 600 nm on 1200 nm at 0 deg: sin b = 0.5, b = 30 deg, x = 250 tan 30 deg.
    bench, part = with_pitch(1200.0, 600.0)
    view = visible_orders(bench, part, "red", [0.0])
    first = view.orders.tolist().index(1)
    assert view.x_mm[0, first] == pytest.approx(250.0 / np.sqrt(3.0))
    zero = view.orders.tolist().index(0)
    assert view.on_screen[0, zero] and not view.seen[0, zero]
    assert view.orders_seen() == (-1, 1)


def test_littrow_sends_the_order_back_into_the_hole() -> None:
    # 2 d sin a = lambda: 600 nm on 600 nm at 30 deg returns order -1 on itself.
    bench, part = with_pitch(600.0, 600.0)
    view = visible_orders(bench, part, "red", [30.0])
    back = view.orders.tolist().index(-1)
    assert view.x_mm[0, back] == pytest.approx(0.0, abs=1e-9)
    assert not view.seen[0, back]


def test_reason_names_the_incidence_from_which_an_order_leaves() -> None:
    bench, part = with_pitch(320.0, 635.0)
    reason = why_no_order(bench, part, "red", np.arange(-75.0, 75.5))
    # asin(635/320 - 1) = 79.86 deg
    assert reason == (
        "order -1 leaves only beyond 79.9 degrees of incidence; the recipe stops at 75"
    )


def test_reason_when_no_order_ever_leaves() -> None:
    bench, part = with_pitch(300.0, 635.0)
    assert "no order leaves at any incidence" in why_no_order(bench, part, "red", [0.0])


def test_reason_when_the_orders_pass_the_screen() -> None:
    bench, part = with_pitch(650.0, 632.0)
    reason = why_no_order(bench, part, "red", [0.0], whose="the table")
    assert "the screen ends at 200 mm" in reason and "the table covers 0 to 0" in reason


def test_no_reason_where_an_order_is_seen() -> None:
    bench, part = with_pitch(1200.0, 600.0)
    assert why_no_order(bench, part, "red", [0.0]) == ""
