"""The rows of the journal as frozen values (no connection here)."""

from dataclasses import dataclass
from typing import Literal

Outcome = Literal["done", "failed"]


@dataclass(frozen=True)
class IntentRow:
    """What was about to be done, and what came of it (``outcome`` None: in doubt)."""

    intent: int
    session: int
    kind: str
    step: int
    mount: int
    mount_deg: float
    laser: str
    stage_deg: float
    planned_s: float
    outcome: str | None
    readback_deg: float | None
    bench_s: float | None


@dataclass(frozen=True)
class FrameRow:
    """One durable frame file (relative to the run folder) and its label."""

    file: str
    sha256: str
    kind: str
    exposure_ms: float
    mount: int
    laser: str
    repeat: int
    step: int
    exposure: int
    planned_s: float


@dataclass(frozen=True)
class SpotRow:
    """One spot of a step on the screen; pixel columns are None from the spots door."""

    x_mm: float
    y_mm: float
    ux_mm: float
    uy_mm: float
    cxy_mm2: float
    brightness: float
    column_px: float | None = None
    row_px: float | None = None
    sigma_major_px: float | None = None
    sigma_minor_px: float | None = None
    snr: float | None = None
    exposure_ms: float | None = None
    saturated: bool | None = None
    shared_xx_mm2: float | None = None
    shared_xy_mm2: float | None = None
    shared_yy_mm2: float | None = None


@dataclass(frozen=True)
class RejectedRow:
    """A candidate that is no spot, with the reason from the closed list."""

    x: float
    y: float
    unit: str
    reason: str
    detail: str
    score: float = 0.0


@dataclass(frozen=True)
class MarkRow:
    """A mark of the screen frame seen at a step, on the nominal screen."""

    number: int
    x_mm: float
    y_mm: float
    u_mm: float


@dataclass(frozen=True)
class StepSpots:
    """What one step's exposures gave."""

    spots: tuple[SpotRow, ...]
    rejected: tuple[RejectedRow, ...] = ()
    background_dn: float | None = None
    noise_dn: float | None = None
    speckle_contrast: float | None = None
    grain_fwhm_px: float | None = None
    speckle_measured: bool = False
    marks: tuple[MarkRow, ...] = ()


@dataclass(frozen=True)
class ReadingRow:
    """What the sensors and the zero order said at a step; None where nothing did."""

    air_C: float | None = None
    pressure_hPa: float | None = None
    humidity_percent: float | None = None
    part_C: float | None = None
    power_mw: float | None = None
    zero_x_mm: float | None = None
    zero_y_mm: float | None = None
    zero_brightness: float | None = None


@dataclass(frozen=True)
class GateRow:
    """One change of the gate, as the report shows it."""

    utc: str
    step: int | None
    state: str
    event: str
    detail: str


@dataclass(frozen=True)
class FaultRow:
    """One fault met, and what was done about it."""

    utc: str
    step: int | None
    what: str
    detail: str
    policy: str
