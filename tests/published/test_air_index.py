"""The air index against published rows.

Ciddor 1996 tables 1 and 3, seen in a test file quoting them (S) and recomputed (C);
Birch & Downs 1994 in a test quoting it (S).
"""

import pytest

from pitchsweep.analysis.air_index import AirState, air_index, air_index_u
from pitchsweep.analysis.analysis_errors import InputRefused


@pytest.mark.parametrize(
    ("t_c", "p_pa", "humidity", "n_minus_1_e8", "tolerance"),
    [
        (20.0, 80000.0, 0.0, 21458.0, 0.5),
        (20.0, 100000.0, 0.0, 26824.4, 0.5),
        (20.0, 120000.0, 0.0, 32191.6, 0.5),
        (10.0, 100000.0, 0.0, 27774.7, 0.5),
        (30.0, 100000.0, 0.0, 25937.2, 0.5),
        (20.0, 80000.0, 75.0, 21394.0, 0.5),
        (20.0, 120000.0, 75.0, 32127.8, 0.5),
        # The two formulas part by up to 4e-8 in hot wet air.
        (40.0, 80000.0, 75.0, 19896.5, 1.5),
        (50.0, 80000.0, 100.0, 19058.4, 5.0),
    ],
)
def test_index_equals_ciddor_rows(
    t_c: float, p_pa: float, humidity: float, n_minus_1_e8: float, tolerance: float
) -> None:
    n = air_index(633.0, AirState(t_c, p_pa / 100.0, humidity))
    assert (n - 1.0) * 1e8 == pytest.approx(n_minus_1_e8, abs=tolerance)


def test_index_equals_birch_and_downs() -> None:
    n = air_index(633.0, AirState(20.0, 1013.25, 0.0))
    assert n == pytest.approx(1.00027180, abs=5e-9)


@pytest.mark.parametrize(
    ("humidity", "n"), [(20.0, 1.0002716292), (80.0, 1.0002711198)]
)
def test_index_equals_modified_edlen_rows(humidity: float, n: float) -> None:
    """Rows of a public implementation of the NIST documentation (S, C)."""
    assert air_index(633.0, AirState(20.0, 1013.25, humidity)) == pytest.approx(
        n, abs=2e-10
    )


def test_uncertainty_follows_the_known_sensitivities() -> None:
    """dn/dT = -9.5e-7 /K, dn/dp = 2.68e-7 /hPa, dn = -8.5e-8 a 10 % humidity (C)."""
    air = AirState(20.0, 1013.25, 50.0)
    assert air_index_u(633.0, air, AirState(1.0, 0.0, 0.0)) == pytest.approx(
        9.5e-7, rel=0.02
    )
    assert air_index_u(633.0, air, AirState(0.0, 1.0, 0.0)) == pytest.approx(
        2.68e-7, rel=0.02
    )
    assert air_index_u(633.0, air, AirState(0.0, 0.0, 10.0)) == pytest.approx(
        8.5e-8, rel=0.03
    )


@pytest.mark.parametrize(
    "air",
    [
        AirState(-5.0, 1013.0, 50.0),
        AirState(20.0, 500.0, 50.0),
        AirState(20.0, 1013.0, 120.0),
    ],
)
def test_index_refuses_outside_its_range(air: AirState) -> None:
    with pytest.raises(InputRefused, match="allowed"):
        air_index(633.0, air)
