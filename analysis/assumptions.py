"""What a fit takes for absent or for given, in words: every report says it (pure)."""

from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part


def assumed_absent(bench: Bench, part: Part) -> tuple[str, ...]:
    """What could move the pitch and is not among the unknowns of this fit."""
    wobble = "wobble of the stage axis"
    if bench.stage.worm_per_turn is None:
        wobble += ", a worm period that is not declared"
    items = ["jumps of camera or beam during the sweep", wobble]
    if not any(laser.may_jump for laser in bench.lasers.values()):
        items.append("jumps of the wavelength too small for these spots to show")
    if bench.stage.closure_recorded_on is not None:
        items.append(
            f"a stage scale that is off by more than the {bench.stage.u_scale_ppm:g}"
            " ppm of the closure recorded on " + bench.stage.closure_recorded_on
        )
    if part.clear_width_mm is None:
        items.append(
            "clipping of the beam by the part's edge (the part file gives no"
            " clear_width_mm)"
        )
    if part.grooves == "straight":
        items.append("grooves curved across the beam")
    if part.cover_mm == 0.0:
        items.append("a wedge of a cover, or one thicker than u_cover_mm")
    items.append("pitch gradient across the beam's footprint")
    return tuple(items)
