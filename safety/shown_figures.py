"""What the signers are shown before they sign, as lines and as values. Pure."""

from collections import Counter
from collections.abc import Mapping

from pitchsweep.configs.job_model import Job
from pitchsweep.safety.beam_map import BeamMap, beam_map
from pitchsweep.safety.exposure_limits import TIMES_S
from pitchsweep.safety.hazard_figures import (
    class_together,
    laser_figures,
    summed_hazard,
)
from pitchsweep.safety.hazard_text import (
    COLUMNS,
    figures_lines,
    summed_line,
    wrapped,
)
from pitchsweep.safety.lasers_alight import (
    at_once_in_words,
    lasers_alight,
    may_be_together,
)


def figures_shown(job: Job) -> tuple[str, ...]:
    """The hazard figures of every laser that may be alight, and of all together."""
    names, bench = lasers_alight(job), job.bench
    lines = [line for n in names for line in figures_lines(laser_figures(bench, n))]
    lines += COLUMNS
    lines.append(f"  {at_once_in_words(job)}")
    if may_be_together(job):
        sums = [summed_hazard(bench, names, time_s) for time_s in TIMES_S]
        lines += [summed_line(one, names) for one in sums]
        together = class_together(bench, names)
        lines.append(
            f"together, all taken as of the shortest wavelength: estimated class"
            f" {together.laser_class}, {together.reason}"
        )
    return wrapped(lines)


def beam_map_shown(job: Job) -> tuple[str, ...]:
    """The beam map in a few lines: how many beams, how strong, what they meet."""
    return beam_map_lines(beam_map(job))


def beam_map_lines(found: BeamMap) -> tuple[str, ...]:
    """A summary of ``found``: one line a laser and kind of beam, with what it meets."""
    lines = [f"beam map of job '{found.job}' on bench '{found.bench}'"]
    lines.append(f"  {found.at_once}")
    alike: dict[tuple[str, str], Counter[str]] = {}
    powers: dict[tuple[str, str], float] = {}
    for beam in found.beams:
        key = (beam.laser, str(beam.kind))
        alike.setdefault(key, Counter()).update(beam.meets)
        powers[key] = max(powers.get(key, 0.0), beam.power_mw)
    for (laser, kind), met in alike.items():
        names = ", ".join(f"{name} ({count} x)" for name, count in met.most_common())
        power_mw = powers[laser, kind]
        lines.append(
            f"  {laser}, {kind}, up to {power_mw:g} mW each, may meet: {names}"
        )
    closed = (
        "closed on every side" if found.closed_all_round else "not closed all round"
    )
    lines.append(f"  what is declared around the part is {closed}")
    return wrapped(lines)


def lasers_shown(job: Job) -> tuple[Mapping[str, object], ...]:
    """What the door sheet says of each laser: class, wavelength, power, density."""
    return tuple(_laser_shown(job, name) for name in lasers_alight(job))


def _laser_shown(job: Job, name: str) -> Mapping[str, object]:
    figures = laser_figures(job.bench, name)
    return {
        "laser": name,
        "class": figures.estimate.laser_class,
        "because": figures.estimate.reason,
        "wavelength_nm": figures.wavelength_nm,
        "power_mw": figures.power_mw,
        "doubled": job.bench.lasers[name].frequency_doubled,
        "density": round(figures.unattended.density, 2),
        "accidental_s": figures.accidental_s,
        "accidental_density": round(figures.at(figures.accidental_s).density, 2),
        "reach_m": round(figures.unattended.direct_m, 1),
        "together": may_be_together(job),
    }
