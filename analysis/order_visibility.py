"""Which orders a sweep can see: the nominal grating equation in the plane (pure).

``sin b = sin a + m * lambda / d``; on the screen order m stands at
``x = D * tan(a + b)``. Everything is nominal: no tilt, no offset. The vacuum
wavelength stands for the one in air, 2.7e-4 longer, which is far below what the
nominal pitch is known to and makes the answer the more careful one at grazing.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from pitchsweep.analysis.records import FloatArray, IntArray
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part

BoolArray = NDArray[np.bool_]


@dataclass(frozen=True)
class OrderVisibility:
    """What happens to each order at each incidence.

    ``orders`` has length M, ``incidence_deg`` length N; the others are (N, M):
    ``x_mm`` where the order meets the screen plane (NaN if it does not),
    ``leaves`` whether it propagates, ``on_screen`` whether it meets the screen,
    ``seen`` whether it also misses the beam hole.
    """

    orders: IntArray
    incidence_deg: FloatArray
    x_mm: FloatArray
    leaves: BoolArray
    on_screen: BoolArray
    seen: BoolArray

    def orders_seen(self) -> tuple[int, ...]:
        """Every order seen at one incidence at least, in rising order."""
        return tuple(int(m) for m in self.orders[self.seen.any(axis=0)])

    def any_but_zero(self) -> bool:
        """Whether an order other than zero is seen at all."""
        return any(m != 0 for m in self.orders_seen())


def wavelength_over_pitch(bench: Bench, part: Part, laser: str) -> float:
    """Nominal lambda/d of ``laser`` (a key of ``bench.lasers``) on ``part``."""
    return bench.lasers[laser].vacuum_wavelength_nm / part.nominal_pitch_nm


def visible_orders(
    bench: Bench, part: Part, laser: str, incidence_deg: ArrayLike
) -> OrderVisibility:
    """Visibility of every order that could leave at any incidence.

    ``incidence_deg``: (N,) angles of incidence, signed as in the lab frame. Orders
    run over all |m| <= 2 d/lambda. Raises KeyError for an unknown laser.
    """
    angle_deg = np.atleast_1d(np.asarray(incidence_deg, dtype=np.float64))
    ratio = wavelength_over_pitch(bench, part, laser)
    highest = max(1, int(np.floor(2.0 / ratio)))
    orders = np.arange(-highest, highest + 1, dtype=np.int64)
    a = np.radians(angle_deg)[:, None]
    sin_b = np.sin(a) + orders[None, :] * ratio
    leaves = np.abs(sin_b) < 1.0
    turn = a + np.arcsin(np.where(leaves, sin_b, 0.0))
    meets = leaves & (np.abs(turn) < np.radians(89.9))
    x_mm = np.where(
        meets, bench.screen.distance_mm * np.tan(np.where(meets, turn, 0.0)), np.nan
    )
    on_screen = meets & (np.abs(x_mm) <= 0.5 * bench.screen.width_mm)
    hole = bench.screen.hole
    off_hole = np.hypot(x_mm - hole.x_mm, -hole.y_mm) > 0.5 * hole.diameter_mm
    return OrderVisibility(
        orders=orders,
        incidence_deg=angle_deg,
        x_mm=x_mm,
        leaves=leaves,
        on_screen=on_screen,
        seen=on_screen & off_hole,
    )


def why_no_order(
    bench: Bench,
    part: Part,
    laser: str,
    incidence_deg: ArrayLike,
    whose: str = "the recipe",
) -> str:
    """One sentence saying why no order but zero is seen at these angles.

    ``whose`` names what sets the angles. Returns an empty string where an order is
    seen after all. Raises KeyError for an unknown laser.
    """
    view = visible_orders(bench, part, laser, incidence_deg)
    if view.any_but_zero():
        return ""
    other = view.orders != 0
    if not view.leaves[:, other].any():
        return _nothing_leaves(bench, part, laser, view, whose)
    missed = np.where(view.leaves & other[None, :], np.abs(view.x_mm), np.nan)
    if not view.on_screen[:, other].any():
        return _past_the_screen(bench, view, missed, whose)
    return (
        f"every order that meets the screen falls on the beam hole "
        f"({bench.screen.hole.diameter_mm:g} mm wide); {whose} "
        f"{_span(view.incidence_deg)}"
    )


def remedy_of_no_order(bench: Bench, part: Part, laser: str) -> str:
    """What helps where no order but zero is seen."""
    if wavelength_over_pitch(bench, part, laser) >= 2.0:
        longest = 2.0 * part.nominal_pitch_nm
        return f"no angle helps: take a laser of less than {longest:g} nm"
    return "sweep to steeper angles or take a laser of shorter wavelength"


def _nothing_leaves(
    bench: Bench, part: Part, laser: str, view: OrderVisibility, whose: str
) -> str:
    needed = wavelength_over_pitch(bench, part, laser) - 1.0
    if needed >= 1.0:
        half = 0.5 * bench.lasers[laser].vacuum_wavelength_nm
        return (
            f"no order leaves at any incidence: the pitch {part.nominal_pitch_nm:g} nm "
            f"is below half the wavelength ({half:.1f} nm)"
        )
    low, high = float(view.incidence_deg.min()), float(view.incidence_deg.max())
    order, reach = (-1, high) if abs(high) >= abs(low) else (1, low)
    beyond = np.degrees(np.arcsin(needed)) * (1.0 if order < 0 else -1.0)
    return (
        f"order {order:+d} leaves only beyond {beyond:.1f} degrees of incidence; "
        f"{whose} stops at {reach:g}"
    )


def _past_the_screen(
    bench: Bench, view: OrderVisibility, missed_mm: FloatArray, whose: str
) -> str:
    half = 0.5 * bench.screen.width_mm
    if not np.isfinite(missed_mm).any():
        return (
            f"every order but zero leaves away from the screen; {whose} "
            f"{_span(view.incidence_deg)}"
        )
    row, column = np.unravel_index(np.nanargmin(missed_mm), missed_mm.shape)
    return (
        f"no order but zero meets the screen: order {view.orders[column]:+d} comes "
        f"nearest, {missed_mm[row, column]:.0f} mm from the middle at "
        f"{view.incidence_deg[row]:g} degrees, and the screen ends at {half:g} mm; "
        f"{whose} {_span(view.incidence_deg)}"
    )


def _span(incidence_deg: FloatArray) -> str:
    low, high = float(incidence_deg.min()), float(incidence_deg.max())
    return f"covers {low:g} to {high:g} degrees"
