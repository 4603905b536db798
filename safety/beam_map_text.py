"""The beam map as lines of plain text, a line for each kind of beam. Pure."""

from collections.abc import Iterator, Sequence

from pitchsweep.safety.beam_map import Beam, BeamMap, refusals

COLUMNS = (
    "incidence: angles of the part, in degrees; azimuth: where the beam goes, seen",
    "from above, 0 towards laser and screen, 90 towards +x, 180 straight on, '-' where",
    "it only leaves with the grooves turned; mW: full drive, in every beam; may meet:",
    "each declared surface within what is known of the direction, grooves any way",
    "round. ghost: turned back once inside the part; gone through: behind the part.",
)
"""What the columns mean, in words."""

HEAD = (
    f"{'laser':<8} {'beam':<25} {'order':>5}  {'incidence':<13}  {'azimuth':<13}"
    f" {'mW':>6}  may meet"
)


def beam_map_lines(found: BeamMap) -> tuple[str, ...]:
    """One line for every laser, kind of beam and order, all its angles together.

    Azimuths are those with the grooves upright; "may meet" takes in every groove
    direction and all that is not known well. Refusals stand at the end.
    """
    rows: dict[tuple[str, str, str, int | None, bool], list[Beam]] = {}
    for beam in found.beams:
        key = (beam.laser, beam.part, beam.kind, beam.order, beam.at.left_behind)
        rows.setdefault(key, []).append(beam)
    lines = [f"Beam map of job '{found.job}' on bench '{found.bench}'", *_around(found)]
    if found.at_once:
        lines.append(f"{found.at_once[:1].upper()}{found.at_once[1:]}.")
    lines += COLUMNS
    if any(beam.at.left_behind for beam in found.beams):
        lines.append("'left': the part stayed as in another mount of the recipe.")
    lines += [HEAD, *(_row(beams) for beams in rows.values())]
    refused = refusals(found)
    lines += [f"REFUSED: {r.what}; {r.remedy}" for r in refused]
    if not refused:
        lines.append("every beam meets only what is declared as a stop and bears it")
    return tuple(lines)


def step_lines(found: BeamMap, laser: str) -> tuple[str, ...]:
    """The long table: one line for every beam of ``laser`` at every angle."""
    return tuple(
        f"{beam.at.incidence_deg:8.2f} deg  {_row([beam])}"
        + (f"  {beam.fault.reason}" if beam.fault else "")
        for beam in found.beams
        if beam.laser == laser
    )


def _around(found: BeamMap) -> Iterator[str]:
    if found.enclosure is None:
        yield "No enclosure is declared."
        return
    declared = found.enclosure
    yield (
        f"Enclosure declared class {declared.declared_class}, ceiling"
        f" {declared.power_ceiling_mw:g} mW, beam plane {declared.beam_height_mm:g} mm"
        " above the floor."
    )
    if not found.closed_all_round:
        yield "Not closed all round: a part that hangs loose could send a beam out."


def _row(beams: Sequence[Beam]) -> str:
    first = beams[0]
    order = "" if first.order is None else f"{first.order:+d}" if first.order else "0"
    kind = f"{first.kind}, left" if first.at.left_behind else str(first.kind)
    steps = [step for beam in beams for step in beam.at.steps_deg]
    span = f"{min(steps):g} to {max(steps):g}" if steps else "every"
    met = dict.fromkeys(name for beam in beams for name in beam.meets)
    return (
        f"{first.laser:<8} {kind:<25} {order:>5}  {span:<13}"
        f"  {_azimuths(beams):<13} {first.power_mw:6.3g}  {', '.join(met)}"
        + (f"  (part {first.part})" if first.part else "")
    )


def _azimuths(beams: Sequence[Beam]) -> str:
    known = [beam.azimuth_deg for beam in beams if beam.azimuth_deg is not None]
    if not known:
        return "-"
    # Beams about the way of the beam itself lie on both sides of the seam at 180.
    beyond = [azimuth % 360.0 for azimuth in known]
    if max(beyond) - min(beyond) < max(known) - min(known):
        known = beyond
    low, high = min(known), max(known)
    return f"{low:.0f}" if high - low < 0.5 else f"{low:.0f} to {high:.0f}"
