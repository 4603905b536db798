"""Unknowns of the parts: pitch, temperature, cover, curvature, and how they sit."""

from collections.abc import Iterator

import numpy as np

from pitchsweep.analysis.fit_parameters import Parameter, Scope, Source
from pitchsweep.analysis.fit_scene import (
    DEG,
    MM,
    MRAD,
    REFERENCE_C,
    FitScene,
    base_pitch_nm,
    local_row,
    log_ratio,
    name_of,
    spots_on,
)
from pitchsweep.analysis.part_ray import Local


def pitches(scene: FitScene) -> Iterator[Parameter]:
    for index, part in enumerate(scene.parts):
        base = base_pitch_nm(part)
        certified = part.certified
        yield log_ratio(
            name_of(scene, index, "pitch"),
            Scope.PART,
            Source.PITCH,
            np.inf if certified is None else certified.u_pitch_nm / base,
            -spots_on(scene, index),
            "nm",
            base,
            base,
        )


def temperatures(scene: FitScene) -> Iterator[Parameter]:
    for index, part in enumerate(scene.parts):
        material = part.material
        warm = abs(material.expansion_per_K) * material.u_temperature_C
        stretch = abs(material.temperature_C - REFERENCE_C) * material.u_expansion_per_K
        for label, source, u in (
            ("strain by temperature", Source.TEMPERATURE, warm),
            ("strain by expansion coefficient", Source.EXPANSION, stretch),
        ):
            if u > 0.0:
                name = name_of(scene, index, label)
                on = -spots_on(scene, index)
                yield log_ratio(name, Scope.PART, source, u, on, "1e-6", 1e6)


def of_each_part(scene: FitScene) -> Iterator[Parameter]:
    """What belongs to a part however it is seated."""
    for index, part in enumerate(scene.parts):
        yield local_row(
            name_of(scene, index, "cover thickness"),
            Scope.PART,
            Source.COVER,
            Local.COVER,
            part.u_cover_mm,
            MM,
            spots_on(scene, index),
            part.cover_mm,
        )
        yield local_row(
            name_of(scene, index, "curvature"),
            Scope.PART,
            Source.CURVATURE,
            Local.CURVATURE,
            part.u_curvature_per_m * 1e-3,
            ("1/m", 1e3),
            spots_on(scene, index),
        )


def seats(scene: FitScene) -> Iterator[Parameter]:
    """How each part sits, one set a mount."""
    zero = float(np.deg2rad(scene.bench.stage.u_zero_deg))
    for index, part in enumerate(scene.parts):
        mine = scene.part == index
        for mount in np.unique(scene.table.mount_deg[mine]):
            here = (mine & (scene.table.mount_deg == mount)).astype(np.float64)
            azimuth, tilt = part.u_groove_azimuth_mrad, part.u_tilt_mrad
            surface = part.u_surface_offset_mm
            for label, column, u, shown, feels in (
                # The incidence is the stage angle minus the zero offset.
                ("zero offset", Local.INCIDENCE, zero, DEG, -here),
                ("groove azimuth", Local.AZIMUTH, azimuth * 1e-3, MRAD, here),
                ("part tilt", Local.TILT, tilt * 1e-3, MRAD, here),
                ("surface offset", Local.SURFACE, surface, MM, here),
            ):
                name = name_of(scene, index, f"{label}, mount {mount:g} deg")
                yield local_row(name, Scope.MOUNT, Source.SEAT, column, u, shown, feels)
