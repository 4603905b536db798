"""Unknowns of the parts: pitch, temperature, cover, curvature, and how they sit."""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.fit_parameters import Parameter, Scope, Source
from pitchsweep.analysis.fit_scene import (
    DEG,
    MM,
    MRAD,
    REFERENCE_C,
    FitScene,
    base_pitch_nm,
    counted_rms_mm,
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
        # Who says bare has looked; who says nothing may have a film on the grooves.
        if part.read_side != "bare":
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
        yield from _wedged_cover(scene, index)
        yield from _curved_grooves(scene, index)


def _wedged_cover(scene: FitScene, index: int) -> Iterator[Parameter]:
    """Index and wedge of a cover that is there; the wedge turns with the part."""
    part, here = scene.parts[index], spots_on(scene, index)
    if part.cover_mm <= 0.0:
        return
    rows = [("cover index", Local.INDEX, part.u_cover_index, ("1", 1.0), here)]
    # Half a turn in the part's own plane takes the wedge with it.
    turned, wedge = np.cos(np.deg2rad(scene.face_deg)), part.u_cover_wedge_mrad * 1e-3
    for label, column in (
        ("cover wedge across the grooves", Local.WEDGE_G),
        ("cover wedge along the grooves", Local.WEDGE_H),
    ):
        rows.append((label, column, wedge, MRAD, np.round(turned) * here))
    for label, column, u, shown, feels in rows:
        mean = part.cover_index if column is Local.INDEX else 0.0
        name = name_of(scene, index, label)
        yield local_row(name, Scope.PART, Source.COVER, column, u, shown, feels, mean)


def _curved_grooves(scene: FitScene, index: int) -> Iterator[Parameter]:
    """The width over which the grooves of a spiral turn within the beam.

    What is not known of the radius counts as if it were the beam's.
    """
    part, beam = scene.parts[index], scene.bench.beam
    rms_mm = counted_rms_mm(part, beam)
    if part.track_radius_mm is None:
        return
    u_relative = np.hypot(
        beam.u_diameter_mm / beam.diameter_mm,
        part.u_track_radius_mm / part.track_radius_mm,
    )
    yield local_row(
        name_of(scene, index, "rms radius of the beam on curved grooves"),
        Scope.PART,
        Source.SPIRAL,
        Local.BEAM_RMS,
        float(rms_mm * u_relative),
        MM,
        spots_on(scene, index),
        rms_mm,
    )


def seats(scene: FitScene) -> Iterator[Parameter]:
    """How each part sits, one set a mount."""
    zero = float(np.deg2rad(scene.bench.stage.u_zero_deg))
    for index, part in enumerate(scene.parts):
        mine = scene.part == index
        for mount, face, seated in _seats_of(scene, mine):
            here = seated.astype(np.float64)
            azimuth, tilt = part.u_groove_azimuth_mrad, part.u_tilt_mrad
            surface = part.u_surface_offset_mm
            for label, column, u, shown, feels in (
                # The incidence is the stage angle minus the zero offset.
                ("zero offset", Local.INCIDENCE, zero, DEG, -here),
                ("groove azimuth", Local.AZIMUTH, azimuth * 1e-3, MRAD, here),
                ("part tilt", Local.TILT, tilt * 1e-3, MRAD, here),
                ("surface offset", Local.SURFACE, surface, MM, here),
            ):
                turned = f", face {face:g} deg" if scene.face_deg.any() else ""
                words = f"{label}, mount {mount:g} deg{turned}"
                name = name_of(scene, index, words)
                yield local_row(name, Scope.MOUNT, Source.SEAT, column, u, shown, feels)


def _seats_of(
    scene: FitScene, mine: NDArray[np.bool_]
) -> Iterator[tuple[float, float, NDArray[np.bool_]]]:
    """Mount, face and spots of every seating of a part."""
    pairs = np.stack([scene.table.mount_deg, scene.face_deg], axis=1)
    for mount, face in np.unique(pairs[mine], axis=0):
        here = mine & (pairs[:, 0] == mount) & (pairs[:, 1] == face)
        yield float(mount), float(face), here
