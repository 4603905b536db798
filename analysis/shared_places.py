"""Repeats at one place: their shared position error is not counted as independent.

Speckle moves a spot by the same amount whenever the same beam lands on the same place
at the same angle. Let n spots of one place have covariances P + S, S shared. Stated as
independent with P + n S each, their mean has covariance P / n + S, which is the truth,
and a fit of anything that acts on all of them alike is exact.
"""

from dataclasses import replace

import numpy as np

from pitchsweep.analysis.records import FloatArray, OrderTable

DECORRELATION_DEG = 0.05
"""The speckle under a spot has changed where the part turned by this: at 250 mm the
spot has then moved by its own radius."""
_REACH_DEG = 3.0 * DECORRELATION_DEG
_SAME_PLACE_MM = 2.0


def repeats_counted(table: OrderTable) -> OrderTable:
    """``table`` with the shared part of each spot counted as often as it is shared.

    Tables without shared columns, and spots without repeats, are returned as they are.
    """
    xx, xy, yy = table.shared_xx_mm2, table.shared_xy_mm2, table.shared_yy_mm2
    if xx is None or xy is None or yy is None or len(table) == 0:
        return table
    more = sharing(table) - 1.0
    if not np.any(more > 0.0):
        return table
    return replace(
        table,
        ux_mm=np.sqrt(table.ux_mm**2 + more * xx),
        uy_mm=np.sqrt(table.uy_mm**2 + more * yy),
        cxy_mm2=table.cxy_mm2 + more * xy,
    )


def sharing(table: OrderTable) -> FloatArray:
    """How many spots share the speckle of each one, itself counted: (N,), at least 1.

    Another step of the same laser, mount, run and part counts exp(-(turn / 0.05
    deg)^2) where its spot lies within 2 mm.
    """
    n = len(table)
    nothing = np.zeros(n, dtype=np.int64)
    run = nothing if table.run is None else table.run
    part = nothing if table.part is None else table.part
    face = nothing if table.face_deg is None else table.face_deg
    order = np.lexsort(
        (table.step, table.stage_deg, table.laser, table.mount_deg, face, part, run)
    )
    seats = np.stack([table.mount_deg, face, table.laser, run, part], axis=1)[order]
    stage, step = table.stage_deg[order], table.step[order]
    place = np.stack([table.x_mm, table.y_mm], axis=1)[order]
    counts = np.ones(n)
    for k in range(1, n):
        turn = np.abs(stage[k:] - stage[:-k])
        near = (turn < _REACH_DEG) & (seats[k:] == seats[:-k]).all(axis=1)
        if not near.any():
            break
        away = np.hypot(*(place[k:] - place[:-k]).T)
        same = near & (away < _SAME_PLACE_MM) & (step[k:] != step[:-k])
        weight = np.where(same, np.exp(-((turn / DECORRELATION_DEG) ** 2)), 0.0)
        counts[k:] += weight
        counts[:-k] += weight
    out = np.empty(n)
    out[order] = counts
    return out
