"""What the signers are shown before they sign, as lines and as values. Pure."""

from collections import Counter
from collections.abc import Mapping

from pitchsweep.configs.job_model import Job
from pitchsweep.safety.beam_map import BeamMap, beam_map
from pitchsweep.safety.exposure_limits import UNATTENDED_S
from pitchsweep.safety.hazard_figures import laser_figures, summed_hazard
from pitchsweep.safety.hazard_text import figures_lines, summed_line, wrapped


def figures_shown(job: Job) -> tuple[str, ...]:
    """The hazard figures of every laser of the recipe, and of all of them together."""
    names = job.recipe.lasers
    lines = [line for n in names for line in figures_lines(laser_figures(job.bench, n))]
    if len(names) > 1:
        summed = summed_hazard(job.bench, names, UNATTENDED_S)
        lines.append(summed_line(summed, names))
    return tuple(lines)


def beam_map_shown(job: Job) -> tuple[str, ...]:
    """The beam map in a few lines: how many beams, how strong, what they meet."""
    return beam_map_lines(beam_map(job))


def beam_map_lines(found: BeamMap) -> tuple[str, ...]:
    """A summary of ``found``: one line a laser and kind of beam, with what it meets."""
    lines = [f"beam map of job '{found.job}' on bench '{found.bench}'"]
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
    return tuple(_laser_shown(job, name) for name in job.recipe.lasers)


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
    }
