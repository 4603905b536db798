"""Small order tables for tests, spot by spot."""

import numpy as np

from pitchsweep.analysis.records import UNKNOWN_ORDER, FloatArray, OrderTable

PRIVATE_MM, SHARED_MM = 0.03, 0.1


def order_table_of(stage_deg: list[float], x_mm: list[float]) -> OrderTable:
    """One spot a step at the given angles and places; u 0.03 private, 0.1 shared."""
    n = len(stage_deg)

    def full(value: float) -> FloatArray:
        return np.full(n, value)

    u = float(np.hypot(PRIVATE_MM, SHARED_MM))
    return OrderTable(
        step=np.arange(n),
        stage_deg=np.array(stage_deg),
        mount_deg=full(0.0),
        laser=np.zeros(n, dtype=np.int64),
        laser_names=("red",),
        order=np.full(n, UNKNOWN_ORDER, dtype=np.int64),
        x_mm=np.array(x_mm),
        y_mm=full(0.0),
        ux_mm=full(u),
        uy_mm=full(u),
        cxy_mm2=full(0.0),
        shared_xx_mm2=full(SHARED_MM**2),
        shared_xy_mm2=full(0.0),
        shared_yy_mm2=full(SHARED_MM**2),
    )
