"""The values that pass between the rooms: spots, order tables, fit results.

All frozen. Arrays are read-only by convention: nobody writes into one received.
"""

from dataclasses import dataclass
from enum import StrEnum
from typing import Any

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

UNKNOWN_ORDER = -(2**31)
"""Stands in an order column where the order was not given."""


class Rejection(StrEnum):
    """Why a spot or a candidate was not used: the closed list."""

    ON_HOLE = "on-beam-hole"
    OFF_SCREEN = "off-screen"
    NO_ORDER = "no-order-there"
    TWO_ORDERS = "between-two-orders"
    SECOND_BEST = "second-candidate-for-one-order"
    OFF_TRACK = "off-its-track"
    STATED_ERROR = "stated-error-too-large"
    SHAPE = "shape-not-a-spot"
    TOO_FAINT = "too-faint"
    SATURATED = "saturated-in-every-exposure"
    EDGE = "cut-by-frame-edge"
    FIT_FAILED = "spot-fit-did-not-converge"
    GRAZING = "order-too-near-grazing"
    ON_MARK = "on-a-mark-of-the-frame"
    OVERRUN = "beam-wider-than-the-part"
    LASER_JUMP = "near-a-wavelength-jump"


@dataclass(frozen=True)
class Spot:
    """One accepted blob of a step, in pixels of the frame.

    ``column_px``/``row_px`` are the centre (pixel centres at whole numbers),
    ``covariance_px2`` its 2x2 covariance in (column, row), ``peak_dn_per_ms`` the
    height over background a millisecond of exposure, ``sigma_px`` the rms radii
    (major, minor), ``snr`` the peak over background noise in the exposure used.
    ``shared_px2`` is the part of the covariance that repeats at the same place and
    angle share: speckle and misfit of the model.
    """

    column_px: float
    row_px: float
    covariance_px2: tuple[tuple[float, float], tuple[float, float]]
    peak_dn_per_ms: float
    sigma_px: tuple[float, float]
    angle_rad: float
    snr: float
    exposure_ms: float
    saturated: bool
    shared_px2: tuple[tuple[float, float], tuple[float, float]] = ((0, 0), (0, 0))


@dataclass(frozen=True)
class RejectedSpot:
    """A candidate or a spot that was not used, with the reason.

    ``score`` is its light over noise where it was judged in a frame, else 0.
    """

    step: int
    x: float
    y: float
    unit: str
    reason: Rejection
    detail: str = ""
    score: float = 0.0


@dataclass(frozen=True)
class SpotSearch:
    """What one step's frames gave: accepted spots and refused candidates.

    ``speckle_contrast`` and ``grain_fwhm_px`` are the speckle that the stated
    covariances allow for (contrast 0: none seen); ``speckle_measured`` whether these
    frames themselves told it.
    """

    spots: tuple[Spot, ...]
    rejected: tuple[RejectedSpot, ...]
    background_dn: float
    noise_dn: float
    speckle_contrast: float = 0.0
    grain_fwhm_px: float = 0.0
    speckle_measured: bool = False


@dataclass(frozen=True)
class OrderTable:
    """Spots of many steps on the screen; every column has length N.

    ``laser`` holds indices into ``laser_names``. ``order`` holds UNKNOWN_ORDER where
    it is not known. ``ux_mm``/``uy_mm`` are standard uncertainties; ``cxy_mm2`` is the
    covariance of x and y. ``brightness`` (any one unit) tells an order from its ghosts
    where it is known. ``part`` holds indices into the parts measured together (all
    the first if None), ``run`` which run a spot is of, ``time_s`` when in its run.
    ``shared_*_mm2`` are the parts of the covariance that repeats at one place share.
    ``face_deg`` is how far the part was turned in its own plane, 0 or 180 (all 0 if
    None).
    """

    step: IntArray
    stage_deg: FloatArray
    mount_deg: FloatArray
    laser: IntArray
    laser_names: tuple[str, ...]
    order: IntArray
    x_mm: FloatArray
    y_mm: FloatArray
    ux_mm: FloatArray
    uy_mm: FloatArray
    cxy_mm2: FloatArray
    brightness: FloatArray | None = None
    part: IntArray | None = None
    run: IntArray | None = None
    time_s: FloatArray | None = None
    shared_xx_mm2: FloatArray | None = None
    shared_xy_mm2: FloatArray | None = None
    shared_yy_mm2: FloatArray | None = None
    face_deg: FloatArray | None = None

    def __len__(self) -> int:
        return int(self.step.shape[0])

    def take(self, keep: NDArray[np.bool_] | IntArray) -> "OrderTable":
        """The rows that ``keep`` (boolean mask or indices, length N) selects."""
        columns: dict[str, Any] = {
            name: value[keep] if isinstance(value, np.ndarray) else value
            for name, value in self.__dict__.items()
        }
        return OrderTable(**columns)


@dataclass(frozen=True)
class BudgetLine:
    """One independent source: its kind (A statistics, B otherwise), share of u."""

    source: str
    kind: str
    u_nm: float
    detail: str = ""


@dataclass(frozen=True)
class Nuisance:
    """A fitted quantity that is not the pitch, with its prior.

    ``correlation`` is that of the fitted quantity with the pitch.
    """

    name: str
    value: float
    u: float
    unit: str
    prior: float
    u_prior: float
    correlation: float = 0.0


@dataclass(frozen=True)
class Decision:
    """Conformance with the rule that made it, in words."""

    outcome: str | None
    rule: str
    conformance_probability: float | None
    lower_nm: float | None
    upper_nm: float | None


@dataclass(frozen=True)
class PitchSeen:
    """The pitch that a subset of the spots gives, for the consistency check.

    ``deviation_nm`` is subset minus whole, ``u_deviation_nm`` its own uncertainty
    from what is not shared.
    """

    subset: str
    pitch_nm: float
    u_nm: float
    deviation_nm: float
    u_deviation_nm: float
    spots: int


@dataclass(frozen=True)
class MonteCarlo:
    """The pitch when all inputs are drawn (JCGM 101), all in nm.

    ``low_nm`` and ``high_nm`` bound the result's coverage symmetrically in
    probability. ``settled``: the draws met a fifth of ``tolerance_nm``; ``lost`` of
    them gave no pitch. ``validated``: the interval pitch +- k u of the fit agrees with
    it within the tolerance; where it does not, U is taken from the drawn interval.
    """

    pitch_nm: float
    u_nm: float
    low_nm: float
    high_nm: float
    draws: int
    lost: int
    tolerance_nm: float
    settled: bool
    validated: bool


@dataclass(frozen=True)
class JumpSeen:
    """A jump of a laser's wavelength before ``step`` of ``run``, as the fit sizes it.

    ``gain``: by how much chi-squared falls with it.
    """

    laser: str
    run: int
    step: int
    size_pm: float
    u_pm: float
    gain: float


@dataclass(frozen=True)
class WavelengthFound:
    """A vacuum wavelength that the sweep tells, with what was known before, in nm."""

    laser: str
    vacuum_nm: float
    u_nm: float
    U_nm: float
    k: float
    prior_nm: float
    u_prior_nm: float


@dataclass(frozen=True)
class PitchResult:
    """What the joint fit says of one part, and everything the report shows.

    ``table`` holds the spots used, ``order`` filled in; ``fitted_x_mm``/``fitted_y_mm``
    and ``residual_x``/``residual_y`` (in units of the stated standard uncertainty)
    align with it. ``incidence_deg`` is the fitted incidence of every used spot.
    ``advice`` says what the data leave weak and what would help; ``monte_carlo`` is
    there on request. ``asked`` names what was asked for beyond a plain fit.
    """

    pitch_nm: float
    u_pitch_nm: float
    U_pitch_nm: float
    k: float
    coverage: float
    dof: float
    pitch_at_C: float
    reduced_chi2: float
    steps_used: int
    spots_used: int
    orders_used: tuple[int, ...]
    budget: tuple[BudgetLine, ...]
    nuisance: tuple[Nuisance, ...]
    decision: Decision
    warnings: tuple[str, ...]
    rejected: tuple[RejectedSpot, ...]
    pitches_seen: tuple[PitchSeen, ...]
    table: OrderTable
    incidence_deg: FloatArray
    fitted_x_mm: FloatArray
    fitted_y_mm: FloatArray
    residual_x: FloatArray
    residual_y: FloatArray
    assumed_absent: tuple[str, ...] = ()
    advice: tuple[str, ...] = ()
    monte_carlo: MonteCarlo | None = None
    jumps: tuple[JumpSeen, ...] = ()
    wavelengths: tuple[WavelengthFound, ...] = ()
    part: str = ""
    serial: str = ""
    origin: str = "handed-in"
    asked: tuple[str, ...] = ()
    software: str = ""
    inputs_sha256: str = ""

    def rejected_counts(self) -> list[dict[str, Any]]:
        """Reason and count, most frequent first."""
        counts: dict[str, int] = {}
        for item in self.rejected:
            counts[item.reason.value] = counts.get(item.reason.value, 0) + 1
        return [
            {"reason": reason, "count": n}
            for reason, n in sorted(counts.items(), key=lambda kv: (-kv[1], kv[0]))
        ]
