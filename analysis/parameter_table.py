"""The one table of what a joint fit leaves unknown: scope and prior of each.

The angle error of every step is not in it: the solver eliminates it.
"""

from pitchsweep.analysis.fit_parameters import Parameter
from pitchsweep.analysis.fit_scene import FitScene
from pitchsweep.analysis.parameters_in_time import (
    drifts,
    laser_maps,
    screen_map,
    wavelength_jumps,
)
from pitchsweep.analysis.parameters_of_bench import (
    air,
    screen_and_beam,
    stage,
    wavelengths,
)
from pitchsweep.analysis.parameters_of_parts import (
    of_each_part,
    pitches,
    seats,
    temperatures,
)


def parameter_table(scene: FitScene) -> tuple[Parameter, ...]:
    """Every unknown of the fit; the pitches of the parts come first, in order."""
    return (
        *pitches(scene),
        *wavelengths(scene),
        *air(scene),
        *temperatures(scene),
        *screen_and_beam(scene),
        *of_each_part(scene),
        *seats(scene),
        *stage(scene),
        *drifts(scene),
        *wavelength_jumps(scene),
        *screen_map(scene),
        *laser_maps(scene),
    )
