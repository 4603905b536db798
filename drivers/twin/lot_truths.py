"""What is true of several parts that are seated in turn on one simulated bench."""

from collections.abc import Sequence
from typing import Any

from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part
from pitchsweep.drivers.twin.truth import MOUNTS_DRAWN, Truth, draw_truth


def draw_lot(
    bench: Bench, part: Part, lot: Sequence[Part], seed: int
) -> tuple[Truth, ...]:
    """One truth for each of ``lot`` as seated, all on one bench.

    ``part`` is the one whose truth is that of a bench with it alone. Places of one
    serial, and a part seated again, have one pitch; every mount has a seat of its own.
    """
    mounts = MOUNTS_DRAWN * len(lot)
    alone = _named(part)
    return tuple(
        draw_truth(
            bench,
            one,
            seed,
            own="" if _named(one) == alone else f", {_named(one)}",
            mounts=mounts,
        )
        for one in lot
    )


def _named(part: Part) -> str:
    return f"{part.part} {part.serial}"


def truths_said(
    truth: Truth, lot: Sequence[Part], truths: Sequence[Truth]
) -> dict[str, Any]:
    """Plain values for ``twin_truth.json``: ``truth``, and every part of a lot once."""
    said = truth.to_json()
    if lot:
        said["parts"] = [
            {
                "part": part.part,
                "serial": part.serial,
                "place": part.place,
                "pitch_nm": one.pitch_nm,
                "part_temperature_C": one.part_temperature_C,
                "expansion_per_K": one.expansion_per_K,
            }
            for part, one in dict(zip(lot, truths, strict=True)).items()
        ]
    return said
