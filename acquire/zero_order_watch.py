"""Is the zero order where the bench file predicts it? (pure)

The zero order obeys the law of reflection whatever the pitch: at incidence a it
stands at x = D tan 2a, y = 0. The allowance is five standard uncertainties of what
the bench and part files say of distance, tilts, offsets, stage zero and part tilt,
and at least ``FLOOR_MM``. It watches for a part that fell, a stage that lost its
zero or turns the wrong way; it measures nothing.
"""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from math import cos, hypot, inf, radians, tan

from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part

FLOOR_MM = 10.0
SIGMAS = 5.0
STEEPEST_DEG = 80.0
LOST_IN_A_ROW = 2


@dataclass(frozen=True)
class ZeroPrediction:
    """Where the zero order should be on the screen, with its allowance."""

    x_mm: float
    y_mm: float
    allowance_x_mm: float
    allowance_y_mm: float

    def has(self, x_mm: float, y_mm: float) -> bool:
        """Whether a spot lies within the allowance."""
        return (
            abs(x_mm - self.x_mm) <= self.allowance_x_mm
            and abs(y_mm - self.y_mm) <= self.allowance_y_mm
        )


def predict_zero_order(
    bench: Bench, part: Part, incidence_deg: float
) -> ZeroPrediction:
    """The prediction at ``incidence_deg``; infinite allowance beyond 80 deg of turn."""
    turn = radians(2.0 * incidence_deg)
    if abs(2.0 * incidence_deg) > STEEPEST_DEG:
        return ZeroPrediction(inf, 0.0, inf, inf)
    screen, beam = bench.screen, bench.beam
    distance, slope = screen.distance_mm, tan(turn)
    stretch = 1.0 / cos(turn) ** 2
    tilt = screen.u_tilt_mrad / 1000.0
    harmonics = radians(hypot(*bench.stage.u_harmonics_arcsec) / 3600.0)
    zero = hypot(radians(bench.stage.u_zero_deg), harmonics)
    u_x = hypot(
        screen.u_distance_mm * slope,
        2.0 * distance * stretch * zero,
        distance * slope * slope * tilt,
        screen.u_offset_mm,
        screen.u_map_mm,
        beam.u_offset_mm + part.u_surface_offset_mm,
    )
    way = distance / cos(turn)
    u_y = hypot(
        2.0 * way * part.u_tilt_mrad / 1000.0,
        way * beam.u_elevation_mrad / 1000.0,
        distance * slope * tilt,
        screen.u_offset_mm,
        screen.u_map_mm,
        beam.u_height_mm,
    )
    return ZeroPrediction(
        x_mm=distance * slope,
        y_mm=0.0,
        allowance_x_mm=max(FLOOR_MM, SIGMAS * u_x),
        allowance_y_mm=max(FLOOR_MM, SIGMAS * u_y),
    )


def is_well_seen(bench: Bench, prediction: ZeroPrediction, share: float = 1.0) -> bool:
    """Whether the prediction, give or take its allowance, is on screen, off hole.

    ``share`` shrinks the allowance for this question only.
    """
    if prediction.allowance_x_mm == inf:
        return False
    screen = bench.screen
    room_x = share * prediction.allowance_x_mm
    room_y = share * prediction.allowance_y_mm
    on_screen = (
        abs(prediction.x_mm) + room_x <= 0.5 * screen.width_mm
        and abs(prediction.y_mm) + room_y <= 0.5 * screen.height_mm
    )
    hole = screen.hole
    from_hole_mm = hypot(prediction.x_mm - hole.x_mm, prediction.y_mm - hole.y_mm)
    clear_mm = 0.5 * hole.diameter_mm + bench.beam.diameter_mm + room_x
    return on_screen and from_hole_mm > clear_mm


def zero_check_incidence_deg(
    bench: Bench, part: Part, grid_deg: Sequence[float]
) -> float | None:
    """The incidence of ``grid_deg`` best suited to check the zero order.

    The smallest one with the full allowance clear; failing that with a half and a
    fifth of it; None where nothing will do.
    """
    for share in (1.0, 0.5, 0.2):
        fits = [
            angle
            for angle in grid_deg
            if is_well_seen(bench, predict_zero_order(bench, part, angle), share)
        ]
        if fits:
            return min(fits, key=lambda angle: (abs(angle), -angle))
    return None


@dataclass(frozen=True)
class WatchState:
    """How many exposures in a row have lost the zero order, and where last."""

    lost_in_a_row: int = 0
    trip_reason: str = ""


def after_exposure(
    state: WatchState,
    *,
    bench: Bench,
    part: Part,
    incidence_deg: float,
    spots_mm: Iterable[tuple[float, float]],
    first_after_homing: bool,
) -> WatchState:
    """The state after one step's spots; ``trip_reason`` set when the gate must trip."""
    prediction = predict_zero_order(bench, part, incidence_deg)
    spots = list(spots_mm)
    if any(prediction.has(x, y) for x, y in spots):
        return WatchState()
    if first_after_homing:
        return replace(state, trip_reason=_not_there(prediction, incidence_deg, spots))
    if not is_well_seen(bench, prediction):
        return state
    lost = state.lost_in_a_row + 1
    if lost < LOST_IN_A_ROW:
        return WatchState(lost)
    return WatchState(
        lost,
        f"zero order lost in {lost} exposures running, last at incidence "
        f"{incidence_deg:g} deg",
    )


def _not_there(
    prediction: ZeroPrediction, incidence_deg: float, spots: list[tuple[float, float]]
) -> str:
    where = (
        f"zero order not where predicted on the first exposure after homing: expected "
        f"x {prediction.x_mm:.0f} +- {prediction.allowance_x_mm:.0f} mm, y "
        f"{prediction.y_mm:.0f} +- {prediction.allowance_y_mm:.0f} mm at incidence "
        f"{incidence_deg:g} deg"
    )
    if not spots:
        return where + "; no spot at all"
    x, y = min(spots, key=lambda s: hypot(s[0] - prediction.x_mm, s[1]))
    return where + f"; nearest spot at x {x:.0f}, y {y:.0f} mm"
