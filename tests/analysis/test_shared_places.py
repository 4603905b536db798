"""Repeats at one place share part of their error, and it is counted so."""

from dataclasses import replace

import numpy as np
import pytest
from order_tables import PRIVATE_MM, SHARED_MM, order_table_of

from pitchsweep.analysis.shared_places import repeats_counted, sharing


def test_the_mean_of_repeats_keeps_the_shared_error() -> None:
    """JCGM 102: the mean of n readings has u^2 = P / n + S where S is common to all."""
    repeats = repeats_counted(order_table_of([10.0] * 4, [80.0] * 4))
    mean_u = (1.0 / np.sum(repeats.ux_mm**-2)) ** 0.5
    assert mean_u == pytest.approx((PRIVATE_MM**2 / 4 + SHARED_MM**2) ** 0.5)


def test_other_places_angles_mounts_and_steps_share_nothing() -> None:
    apart = order_table_of([10.0, 10.0, 10.5, 11.0], [80.0, 90.0, 80.5, 81.0])
    assert sharing(apart) == pytest.approx(1.0)
    assert repeats_counted(apart) is apart
    again = order_table_of([10.0, 10.0], [80.0, 80.0])
    seats = replace(again, mount_deg=np.array([0.0, 90.0]))
    assert sharing(seats) == pytest.approx(1.0)
    one_step = replace(again, step=np.array([3, 3]))
    assert sharing(one_step) == pytest.approx(1.0)


def test_a_turn_of_the_part_lets_go_of_the_speckle_by_and_by() -> None:
    near = sharing(order_table_of([10.0, 10.05], [80.0, 80.4]))
    assert near == pytest.approx(1.0 + np.exp(-1.0))


def test_a_table_without_shared_columns_stays_as_it_is() -> None:
    plain = replace(order_table_of([1.0, 1.0], [5.0, 5.0]), shared_xx_mm2=None)
    assert repeats_counted(plain) is plain


def test_the_order_of_rows_does_not_matter() -> None:
    rows = order_table_of(
        [10.0, 12.0, 10.0, 12.0, 10.0], [80.0, 90.0, 80.0, 90.0, 80.0]
    )
    turned = rows.take(np.array([4, 2, 0, 3, 1]))
    assert sharing(turned).tolist() == sharing(rows)[[4, 2, 0, 3, 1]].tolist()
