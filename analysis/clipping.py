"""Steps at which the beam overruns the part: its spots lie where the cut left them."""

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.fit_problem import wrapped_deg
from pitchsweep.analysis.records import OrderTable
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part

HARMLESS = 0.75
"""Beam diameters (1/e^2) from its middle beyond which an edge moves the centre of light
by less than 0.5 % of the rms radius (three rms radii of a Gaussian beam)."""
SURE = 2.0
"""Standard uncertainties of the beam's place that are allowed for."""


def overrun(
    table: OrderTable, bench: Bench, parts: tuple[Part, ...]
) -> NDArray[np.bool_]:
    """Whether the beam may reach beyond the clear width of its part at each spot (N,).

    False throughout for parts that give none.
    """
    index = table.part if table.part is not None else np.zeros(len(table), np.int64)
    turned = np.deg2rad(wrapped_deg(table.stage_deg - table.mount_deg))
    cut = np.zeros(len(table), dtype=np.bool_)
    for number, part in enumerate(parts):
        if part.clear_width_mm is None:
            continue
        aside_mm = SURE * np.hypot(
            bench.beam.u_offset_mm, part.u_surface_offset_mm * np.sin(turned)
        )
        reach_mm = HARMLESS * bench.beam.diameter_mm + aside_mm
        beyond = reach_mm > part.clear_width_mm / 2.0 * np.cos(turned)
        cut |= beyond & (index == number)
    return cut
