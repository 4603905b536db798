"""The photons door: frames of the screen, rendered from the traced rays.

A pure function of the world's state: no light gives a dark frame, a moving stage
smears, the beam hole swallows light. Nothing is read from a job or a controller.
"""

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from pitchsweep.configs.bench_model import Bench, Camera, Screen
from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.twin.camera_noise import digitise
from pitchsweep.drivers.twin.effects import (
    NO_FAULT,
    LaserState,
    Steps,
    ghost_shift_mm,
    single_step,
)
from pitchsweep.drivers.twin.frame_extras import (
    add_marks,
    add_smear,
    stray_places,
)
from pitchsweep.drivers.twin.keyed_noise import keyed_generator
from pitchsweep.drivers.twin.light_patches import Blob, add_blob
from pitchsweep.drivers.twin.optics import trace_bundle
from pitchsweep.drivers.twin.rays import FloatArray
from pitchsweep.drivers.twin.speckle import ANGLE_CELL_DEG, SpeckleKey
from pitchsweep.drivers.twin.truth import Truth, twin_settings

_SMEAR_DEG = 0.05
_MOST_SMEAR_PARTS = 100


def render(
    truth: Truth,
    bench: Bench,
    label: Label,
    *,
    stage_deg: float,
    mount_deg: float,
    exposure_ms: float,
    light_on: bool,
    from_above: bool = False,
    laser_state: LaserState = NO_FAULT,
    motion_deg: float = 0.0,
) -> NDArray[np.uint16]:
    """A frame (height_px, width_px) in digital numbers.

    ``stage_deg`` is what the stage reads when the exposure begins and ``motion_deg``
    how far it turns during it; ``light_on`` whether light of ``label.laser`` reaches
    the part.
    """
    steps = single_step(
        label,
        stage_deg=stage_deg,
        mount_deg=mount_deg,
        from_above=from_above,
        laser_state=laser_state,
    )
    electrons = expected_electrons(
        truth,
        bench,
        steps,
        exposure_ms=exposure_ms if light_on else 0.0,
        motion_deg=motion_deg,
    )
    electrons += room_electrons(truth, bench, label.planned_s, exposure_ms)
    electrons *= _screen_mask(bench.camera, bench.screen)
    add_marks(electrons, truth, bench, label.planned_s, exposure_ms)
    add_smear(electrons, twin_settings(bench).effects)
    noise = keyed_generator(
        truth.seed,
        "frame noise" if light_on else "dark frame noise",
        mount=label.mount,
        laser=label.laser,
        repeat=label.repeat,
        step=label.step,
        exposure=label.exposure,
    )
    return digitise(
        electrons,
        camera=bench.camera,
        exposure_ms=exposure_ms,
        seed=truth.seed,
        hot_count=twin_settings(bench).effects.hot_pixels,
        noise=noise,
    )


def expected_electrons(
    truth: Truth,
    bench: Bench,
    steps: Steps,
    *,
    exposure_ms: float,
    motion_deg: float = 0.0,
) -> FloatArray:
    """Expected electrons (height_px, width_px) of the laser's light, without noise.

    ``steps`` holds one step. The beam hole and the edge of the screen are not yet cut.
    """
    camera = bench.camera
    image = np.zeros((camera.height_px, camera.width_px))
    if exposure_ms <= 0.0:
        return image
    parts = min(_MOST_SMEAR_PARTS, 1 + int(abs(motion_deg) / _SMEAR_DEG))
    for part in range(parts):
        moved = motion_deg * (part / (parts - 1) if parts > 1 else 0.0)
        for blob in blobs_of(truth, bench, _turned(steps, moved), exposure_ms / parts):
            add_blob(image, blob, twin_settings(bench).effects)
    return image


def room_electrons(
    truth: Truth, bench: Bench, planned_s: float, exposure_ms: float
) -> float:
    """Electrons per pixel of room light, which steps up once at its own time."""
    effects = twin_settings(bench).effects
    rate = effects.room_light_dn_per_s
    if planned_s >= truth.phases.room_step_s:
        rate += effects.room_light_step_dn_per_s
    return rate * exposure_ms * 1e-3 / bench.camera.gain_dn_per_e


def pixel_of(camera: Camera, place_mm: FloatArray) -> FloatArray:
    """Column and row (..., 2) of reported places (..., 2) by the nominal map."""
    x, y = place_mm[..., 0], place_mm[..., 1]
    return np.stack(
        (
            camera.centre_column_px + x / camera.mm_per_px,
            camera.centre_row_px - y / camera.mm_per_px,
        ),
        axis=-1,
    )


def _turned(steps: Steps, moved_deg: float) -> Steps:
    return Steps(**{**steps.__dict__, "stage_deg": steps.stage_deg + moved_deg})


def blobs_of(
    truth: Truth, bench: Bench, steps: Steps, exposure_ms: float
) -> list[Blob]:
    """Every visible order, and its ghost, as blobs on the pixels."""
    settings = twin_settings(bench)
    landing, spread = trace_bundle(truth, bench, steps)
    power_mw = bench.lasers[steps.laser].power_mw
    total = settings.light_e_per_ms_per_mw * power_mw * exposure_ms
    key = _speckle_key(truth, bench, steps)
    places = [(landing.place_mm[0], total)]
    if settings.effects.ghost_fraction > 0.0:
        copies = landing.place_mm[0] + ghost_shift_mm(truth)
        places.append((copies, total * settings.effects.ghost_fraction))
    blobs = []
    for place, electrons in places:
        pixels = pixel_of(bench.camera, place)
        for i in np.flatnonzero(landing.visible[0]):
            covariance = _covariance_px2(bench, spread[0, i])
            light = float(electrons * landing.share[0, i])
            column, row = (float(value) for value in pixels[i])
            blobs.append(Blob(column, row, covariance, light, key))
    return blobs + _stray_blobs(truth, bench, steps, total, key)


def _stray_blobs(
    truth: Truth, bench: Bench, steps: Steps, total: float, key: SpeckleKey
) -> list[Blob]:
    """Reflections that are no orders, round and of the beam's size."""
    share = twin_settings(bench).effects.reflection_fraction
    if share <= 0.0:
        return []
    radius_px = bench.beam.diameter_mm / 2.0 / bench.camera.mm_per_px
    covariance = radius_px**2 * np.eye(2)
    places = stray_places(truth, float(steps.stage_deg[0]) - steps.mount_deg)
    return [
        Blob(float(column), float(row), covariance, share * total, key)
        for column, row in pixel_of(bench.camera, places)
    ]


def _speckle_key(truth: Truth, bench: Bench, steps: Steps) -> SpeckleKey:
    lag = twin_settings(bench).effects.backlash_deg if steps.from_above else 0.0
    angle = float(steps.stage_deg[0]) + lag - steps.mount_deg
    cell = round(angle / ANGLE_CELL_DEG)
    return SpeckleKey(truth.seed, steps.mount, steps.laser, cell)


def _covariance_px2(bench: Bench, spread: FloatArray) -> FloatArray:
    """Covariance (2, 2) in (column, row) of a blob whose bundle spreads by ``spread``.

    ``beam.diameter_mm`` is the 1/e^2 diameter, four rms radii.
    """
    scale = bench.camera.mm_per_px
    to_pixels = np.array([[1.0], [-1.0]]) / scale
    columns = to_pixels * spread * (bench.beam.diameter_mm / 4.0)
    blur = twin_settings(bench).effects.screen_blur_mm / scale
    floor = max(blur, 0.3)
    return np.asarray(columns @ columns.T + floor**2 * np.eye(2))


@lru_cache(maxsize=4)
def _screen_mask(camera: Camera, screen: Screen) -> FloatArray:
    """1 where the camera sees the screen, 0 on the beam hole and beyond the edge."""
    column = np.arange(camera.width_px)[None, :]
    row = np.arange(camera.height_px)[:, None]
    x = camera.mm_per_px * (column - camera.centre_column_px)
    y = -camera.mm_per_px * (row - camera.centre_row_px)
    inside = (np.abs(x) < screen.width_mm / 2) & (np.abs(y) < screen.height_mm / 2)
    away = np.hypot(x - screen.hole.x_mm, y - screen.hole.y_mm)
    return np.asarray(inside & (away > screen.hole.diameter_mm / 2), dtype=np.float64)
