"""Hazard figures as lines of plain text, at most 88 characters each. Pure."""

import textwrap
from collections.abc import Sequence

from pitchsweep.safety.hazard_figures import HazardFigures, SummedHazard, TimeFigures

WIDTH = 88
HEAD = (
    "  exposure  eye limit (rule)         x limit   x skin  density"
    "   direct     lens    matt"
)


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
        f" thermal, {summed.photochemical:.3g} x photochemical: {verdict}"
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
