"""Hazard figures as lines of plain text, at most 88 characters each. Pure."""

import textwrap
from collections.abc import Sequence

from pitchsweep.safety.hazard_figures import HazardFigures, SummedHazard, TimeFigures

WIDTH = 88
HEAD = (
    "  exposure  eye limit (rule)         x limit   x skin  density"
    "   direct     lens    matt"
)
COLUMNS = (
    "  exposure: how long somebody looks; eye limit: irradiance over a 7 mm pupil and"
    " the rule it comes from (heat on the retina, or blue light)",
    "  x limit: this beam over 7 mm, as a multiple of the eye's limit; x skin: the beam"
    " itself, as a multiple of the skin's",
    "  density: optical density that brings it down to the eye's limit",
    "  direct, lens, matt: how far the hazard reaches along the beam, behind a lens of"
    " 50 mm focal length, from a matt white surface",
)
"""What the columns of the table mean, in words."""


def figures_lines(figures: HazardFigures) -> tuple[str, ...]:
    """What a person reads before signing: beam, class, limits, distances, cautions."""
    smallest = " (the smallest possible, assumed)" if figures.divergence_assumed else ""
    estimate = figures.estimate
    head = (
        f"{figures.laser}: {figures.wavelength_nm:g} nm, {figures.power_mw:.3g} mW at"
        f" full drive, beam {figures.beam_mm:g} mm,"
        f" {figures.divergence_mrad:.2f} mrad{smallest}",
        f"  {figures.pupil_power_mw:.3g} mW through 7 mm,"
        f" {figures.pupil_irradiance_w_m2:.3g} W/m2 over it;"
        f" an accidental look counts {figures.accidental_s:g} s",
        f"  estimated class {estimate.laser_class}: {estimate.reason}",
        HEAD,
    )
    rows = tuple(_time_line(times) for times in figures.times)
    cautions = dict.fromkeys((*estimate.cautions, *figures.remarks))
    return wrapped((*head, *rows, *(f"  {caution}" for caution in cautions)))


def summed_line(summed: SummedHazard, names: Sequence[str]) -> str:
    """One line for several lasers at once."""
    verdict = "within the limits" if summed.worst <= 1.0 else "above the limits"
    return (
        f"{' + '.join(names)} for {summed.exposure_s:g} s: {summed.thermal:.3g} x"
        f" thermal, {summed.photochemical:.3g} x photochemical, {summed.skin:.2g} x"
        f" skin, density {summed.density:.2f}: {verdict}"
    )


def wrapped(lines: Sequence[str]) -> tuple[str, ...]:
    """``lines`` with the long ones broken, their tails set in."""
    wrap = textwrap.TextWrapper(WIDTH, subsequent_indent="    ")
    return tuple(
        part
        for line in lines
        for part in ([line] if len(line) <= WIDTH else wrap.wrap(line))
    )


def _time_line(times: TimeFigures) -> str:
    limit = f"{times.eye.irradiance_w_m2:.3g} W/m2 {times.eye.rule}"
    return (
        f"  {times.exposure_s:6g} s  {limit:<23}  {times.times_limit:7.3g}"
        f"  {times.skin_times_limit:7.2g}  {times.density:7.2f}"
        f" {times.direct_m:6.1f} m {times.lens_m:6.1f} m {times.diffuse_m:5.2f} m"
    )
