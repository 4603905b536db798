"""The twin's refractive index of air against printed values.

Source: README of the ref-index package, which implements the documentation of the NIST
Engineering Metrology Toolbox (633.0 nm, 101325 Pa; modified Edlén column), and the row
of Birch and Downs 1994 for dry air, 1.00027180, as quoted in its tests (codes S and C).
"""

import pytest

from pitchsweep.drivers.twin.air import air_index


@pytest.mark.parametrize(
    ("temperature_c", "humidity_percent", "printed", "digits"),
    [
        (20.0, 20.0, 1.0002716292, 6e-11),
        (20.0, 80.0, 1.0002711198, 6e-11),
        (60.0, 80.0, 1.0002339749, 6e-11),
        (20.0, 0.0, 1.00027180, 6e-9),
    ],
)
def test_printed_index(
    temperature_c: float, humidity_percent: float, printed: float, digits: float
) -> None:
    index = air_index(
        633.0,
        temperature_c=temperature_c,
        pressure_hpa=1013.25,
        humidity_percent=humidity_percent,
    )
    assert abs(index - printed) < digits
