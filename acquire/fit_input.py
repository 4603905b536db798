"""What a fit is made from, whatever it was read from; several joined (pure)."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from pitchsweep.analysis.records import (
    UNKNOWN_ORDER,
    IntArray,
    OrderTable,
    RejectedSpot,
)
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part

TURN_DEG = 360.0


@dataclass(frozen=True)
class MeasuredState:
    """Means of what the sensors read during a sweep, and how the part's moved."""

    air_C: float
    pressure_hPa: float
    humidity_percent: float
    part_C: float
    spread_part_K: float = 0.0


@dataclass(frozen=True)
class FitInput:
    """Spots with the bench and part they belong to; ``name`` says where from.

    ``part`` is what the fit is about; ``references`` are the other parts among the
    spots, numbered from 1 in the table's ``part`` column. ``measured`` goes with the
    part and each reference; empty where no sensor read anything.
    """

    name: str
    table: OrderTable
    bench: Bench
    part: Part
    coverage: float
    rejected: tuple[RejectedSpot, ...] = ()
    warnings: tuple[str, ...] = ()
    references: tuple[Part, ...] = ()
    measured: tuple[MeasuredState | None, ...] = ()


@dataclass(frozen=True)
class SpotPlace:
    """One spot on its way into a table: step, angles, laser, place, covariance."""

    step: int
    stage_deg: float
    mount_deg: float
    laser: str
    x_mm: float
    y_mm: float
    ux_mm: float
    uy_mm: float
    cxy_mm2: float
    brightness: float
    time_s: float | None = None
    shared_xx_mm2: float = 0.0
    shared_xy_mm2: float = 0.0
    shared_yy_mm2: float = 0.0
    face_deg: float = 0.0


def order_table(rows: Sequence[SpotPlace], laser_names: tuple[str, ...]) -> OrderTable:
    """The rows as a table of unknown orders; every laser must be in ``laser_names``."""

    def column(name: str) -> np.ndarray[tuple[int], np.dtype[np.float64]]:
        return np.array([getattr(row, name) for row in rows], dtype=np.float64)

    return OrderTable(
        step=np.array([row.step for row in rows], dtype=np.int64),
        stage_deg=column("stage_deg"),
        mount_deg=column("mount_deg"),
        laser=np.array([laser_names.index(row.laser) for row in rows], dtype=np.int64),
        laser_names=laser_names,
        order=np.full(len(rows), UNKNOWN_ORDER, dtype=np.int64),
        x_mm=column("x_mm"),
        y_mm=column("y_mm"),
        ux_mm=column("ux_mm"),
        uy_mm=column("uy_mm"),
        cxy_mm2=column("cxy_mm2"),
        brightness=column("brightness"),
        time_s=None if any(r.time_s is None for r in rows) else column("time_s"),
        shared_xx_mm2=column("shared_xx_mm2"),
        shared_xy_mm2=column("shared_xy_mm2"),
        shared_yy_mm2=column("shared_yy_mm2"),
        face_deg=column("face_deg"),
    )


def joined(inputs: Sequence[FitInput]) -> FitInput:
    """One input from several of the same bench.

    Steps are numbered on; every input's mounts count as seatings of their own: they
    are told apart by whole turns of ``mount_deg``, which change no angle. Where parts
    differ, the fit is about the first that has no certified pitch. Raises ValueError
    for an empty list, where benches differ, or for two parts without certificate.
    """
    if not inputs:
        raise ValueError("nothing to fit")
    first = inputs[0]
    if len(inputs) == 1:
        return first
    _refuse_twice_the_same(inputs)
    for other in inputs[1:]:
        if other.bench.model_copy(update={"twin": None}) != first.bench.model_copy(
            update={"twin": None}
        ):
            raise ValueError(f"{other.name} and {first.name} are of different benches")
    parts = _parts([item.part for item in inputs])
    tables, rejected = [], []
    steps = 0
    for turn, item in enumerate(inputs):
        tables.append(_moved(item.table, steps, turn, parts.index(item.part)))
        rejected += [_numbered_on(spot, steps) for spot in item.rejected]
        steps += 1 + max(
            int(item.table.step.max(initial=0)),
            max((spot.step for spot in item.rejected), default=0),
        )
    return FitInput(
        name=" + ".join(item.name for item in inputs),
        table=_stacked(tables),
        bench=first.bench,
        part=parts[0],
        references=parts[1:],
        measured=tuple(_state_of(part, inputs) for part in parts),
        coverage=first.coverage,
        rejected=tuple(rejected),
        warnings=tuple(w for item in inputs for w in item.warnings),
    )


def _refuse_twice_the_same(inputs: Sequence[FitInput]) -> None:
    """The same readings counted twice would lower u for nothing."""
    seen: dict[bytes, str] = {}
    for item in inputs:
        spots = np.sort(item.table.x_mm).tobytes()
        if spots in seen:
            raise ValueError(f"{item.name} holds the same spots as {seen[spots]}")
        seen[spots] = item.name


def _parts(each: Sequence[Part]) -> tuple[Part, ...]:
    """The different parts, the one that the fit is about first."""
    different = list(dict.fromkeys(each))
    open_ones = [part for part in different if part.certified is None]
    if len(open_ones) > 1:
        names = " and ".join(part.part for part in open_ones)
        raise ValueError(f"{names} are different parts, neither with a certified pitch")
    target = open_ones[0] if open_ones else different[0]
    return (target, *(part for part in different if part != target))


def _state_of(part: Part, inputs: Sequence[FitInput]) -> MeasuredState | None:
    """What was measured with ``part`` in place; the mean where there are several."""
    states = [
        state
        for item in inputs
        if item.part == part
        for state in item.measured[:1]
        if state is not None
    ]
    if not states:
        return None
    columns = {
        name: sum(vars(state)[name] for state in states) / len(states)
        for name in vars(states[0])
    }
    return MeasuredState(**columns)


def _moved(table: OrderTable, steps: int, turn: int, part: int) -> OrderTable:
    columns: dict[str, Any] = {
        **table.__dict__,
        "step": table.step + steps,
        "mount_deg": table.mount_deg + TURN_DEG * turn,
        "run": np.full(len(table), turn, dtype=np.int64),
        "part": np.full(len(table), part, dtype=np.int64),
        "face_deg": np.zeros(len(table)) if table.face_deg is None else table.face_deg,
    }
    return OrderTable(**columns)


def _numbered_on(spot: RejectedSpot, steps: int) -> RejectedSpot:
    return RejectedSpot(
        spot.step + steps, spot.x, spot.y, spot.unit, spot.reason, spot.detail
    )


def _stacked(tables: Sequence[OrderTable]) -> OrderTable:
    names = tuple(dict.fromkeys(n for table in tables for n in table.laser_names))
    columns: dict[str, Any] = {"laser_names": names}
    for name in tables[0].__dict__:
        if name == "laser":
            columns[name] = np.concatenate([_laser_index(t, names) for t in tables])
        elif name != "laser_names":
            parts = [getattr(table, name) for table in tables]
            # A column that one table does not know is not known.
            known = all(part is not None for part in parts)
            columns[name] = np.concatenate(parts) if known else None
    return OrderTable(**columns)


def _laser_index(table: OrderTable, names: tuple[str, ...]) -> IntArray:
    place = np.array([names.index(name) for name in table.laser_names], np.int64)
    return place[table.laser]
