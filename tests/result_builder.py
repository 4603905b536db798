"""A synthetic fit result and report context; no fit is run, all figures are invented.

The tracks come from the plane grating equation sin b = sin a + m lambda/d written out
here, on a flat screen at ``DISTANCE_MM``, with a slow bend added so that measured and
fitted differ by noise alone.
"""

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.records import (
    BudgetLine,
    Decision,
    Nuisance,
    OrderTable,
    PitchResult,
    PitchSeen,
    RejectedSpot,
    Rejection,
)
from pitchsweep.analysis.report_context import (
    Fact,
    FrameMark,
    FrameShown,
    GateRow,
    PartFacts,
    ReportContext,
    ScreenFacts,
)

DISTANCE_MM = 250.0
HALF_WIDTH_MM = 220.0
PITCH_NM = 830.4172
WAVELENGTH_NM = {"red": 632.8, "violet": 405.0}

Rows = NDArray[np.float64]


def screen_x_mm(incidence_deg: Rows, order: Rows, wavelength_nm: Rows) -> Rows:
    """Where an order meets the screen; NaN where it does not leave towards it."""
    a = np.radians(incidence_deg)
    sine = np.sin(a) + order * wavelength_nm / PITCH_NM
    leaves = np.abs(sine) < 1.0
    turned = a + np.arcsin(np.where(leaves, sine, 0.0))
    ahead = leaves & (np.abs(turned) < np.radians(80.0))
    return np.where(ahead, DISTANCE_MM * np.tan(np.where(ahead, turned, 0.0)), np.nan)


def build_rows(lasers: tuple[str, ...], mounts: tuple[float, ...]) -> list[Rows]:
    """Columns step, stage, mount, laser, order, incidence, x of every spot seen."""
    rows: list[tuple[float, ...]] = []
    step = 0
    for mount in mounts:
        for incidence in np.arange(-60.0, 60.5, 2.0):
            for laser, name in enumerate(lasers):
                for order in (-3, -2, -1, 0, 1, 2, 3):
                    x = screen_x_mm(
                        np.array([incidence]),
                        np.array([float(order)]),
                        np.array([WAVELENGTH_NM[name]]),
                    )[0]
                    if np.isfinite(x) and 4.0 < abs(x) < HALF_WIDTH_MM:
                        stage = mount + incidence + 0.21
                        rows.append(
                            (step, stage, mount, laser, order, incidence, float(x))
                        )
            step += 1
    return [np.array(column, dtype=np.float64) for column in zip(*rows, strict=True)]


def build_result(
    *,
    lasers: tuple[str, ...] = ("red",),
    mounts: tuple[float, ...] = (0.0, 180.0),
    seed: int = 0,
) -> PitchResult:
    """A result such as a good night gives."""
    rng = np.random.default_rng(seed)
    step, stage, mount, laser, order, incidence, x = build_rows(lasers, mounts)
    y = 2.0 + 0.01 * x
    u = np.full(x.shape, 0.1)
    noise_x, noise_y = rng.normal(size=x.shape), rng.normal(size=x.shape)
    table = OrderTable(
        step=step.astype(np.int64),
        stage_deg=stage,
        mount_deg=mount,
        laser=laser.astype(np.int64),
        laser_names=lasers,
        order=order.astype(np.int64),
        x_mm=x + u * noise_x,
        y_mm=y + u * noise_y,
        ux_mm=u,
        uy_mm=u,
        cxy_mm2=np.zeros(x.shape),
    )
    return PitchResult(
        pitch_nm=830.4169123,
        u_pitch_nm=0.0312,
        U_pitch_nm=0.0634,
        k=2.03,
        coverage=0.95,
        dof=61.4,
        pitch_at_C=20.0,
        reduced_chi2=1.04,
        steps_used=len(set(step.tolist())),
        spots_used=len(x),
        orders_used=tuple(sorted({int(m) for m in order})),
        budget=build_budget(),
        nuisance=build_nuisance(),
        decision=Decision(
            "conforms",
            "guarded acceptance: conforms if the whole interval pitch ± U lies inside"
            " the tolerance",
            0.9999931,
            829.5,
            831.0,
        ),
        warnings=(),
        rejected=build_rejected(step, rng),
        pitches_seen=build_pitches_seen(),
        table=table,
        incidence_deg=incidence,
        fitted_x_mm=x,
        fitted_y_mm=y,
        residual_x=noise_x,
        residual_y=noise_y,
        software="pitchsweep 0.1.0",
        inputs_sha256="5f" * 32,
    )


def build_rejected(step: Rows, rng: np.random.Generator) -> tuple[RejectedSpot, ...]:
    """Thirty-odd spots not used, on the screen and in the frame."""
    steps = sorted({int(value) for value in step})
    spots = [
        RejectedSpot(
            int(rng.choice(steps)),
            float(rng.uniform(-HALF_WIDTH_MM, HALF_WIDTH_MM)),
            float(rng.normal(0.0, 8.0)),
            "mm",
            reason,
            "3.4 mm from the nearest order",
        )
        for reason in 12 * [Rejection.NO_ORDER] + 5 * [Rejection.OFF_TRACK]
    ]
    spots += [
        RejectedSpot(int(value), 0.4, 2.0, "mm", Rejection.ON_HOLE)
        for value in steps[25:36]
    ]
    spots += [
        RejectedSpot(int(value), 641.2, 88.0, "px", Rejection.TOO_FAINT)
        for value in steps[:6]
    ]
    return tuple(spots)


def build_budget() -> tuple[BudgetLine, ...]:
    """Independent lines whose squares add up to 0.0312 nm."""
    return (
        BudgetLine("stage: harmonics and repeatability", "B", 0.0231),
        BudgetLine("spot positions", "A", 0.0169, "from the fit's own covariance"),
        BudgetLine("screen: distance, pose, map", "B", 0.0101),
        BudgetLine("part temperature and expansion", "B", 0.0054, "0.5 K x 13e-6 /K"),
        BudgetLine("laser wavelength, red", "B", 0.00125),
        BudgetLine("refractive index of air", "B", 0.0011),
        BudgetLine("part tilt and groove azimuth", "B", 0.0007),
    )


def build_nuisance() -> tuple[Nuisance, ...]:
    """Bench, mounts and a long tail of map terms."""
    first = (
        Nuisance("screen distance", 247.3182, 0.214, "mm", 250.0, 5.0),
        Nuisance("screen tilt about x", 11.204, 0.92, "mrad", 0.0, 30.0),
        Nuisance("stage harmonic 1, sine", 38.44, 2.3, "arcsec", 0.0, 60.0),
        Nuisance("stage harmonic 1, cosine", -12.02, 2.2, "arcsec", 0.0, 60.0),
        Nuisance("mount 0: zero offset", 0.21137, 0.0012, "deg", 0.0, 0.5),
        Nuisance("mount 0: groove azimuth", -2.41, 0.34, "mrad", 0.0, 10.0),
        Nuisance("beam elevation", 1.31, 0.4, "mrad", 0.0, 5.0),
    )
    terms = tuple(
        Nuisance(f"screen map x term {i}", 0.01 * i - 0.1, 0.03, "mm", 0.0, 0.118)
        for i in range(36)
    )
    return first + terms


def build_pitches_seen() -> tuple[PitchSeen, ...]:
    """What subsets of the spots give."""
    rows = (
        ("order −2", -0.021, 0.024, 118),
        ("order −1", 0.006, 0.014, 236),
        ("order +1", -0.004, 0.015, 232),
        ("order +2", 0.017, 0.026, 114),
        ("positive side", -0.002, 0.012, 346),
        ("negative side", 0.003, 0.012, 354),
        ("first half of the sweep", 0.011, 0.013, 410),
        ("second half of the sweep", -0.012, 0.013, 408),
        ("mount 0", 0.019, 0.016, 409),
        ("mount 180", -0.018, 0.016, 409),
    )
    return tuple(
        PitchSeen(name, 830.4169 + shift, 0.045, shift, u, spots)
        for name, shift, u, spots in rows
    )


def build_frame(step: int, seed: int) -> FrameShown:
    """An invented frame: background, noise and four spots, one of them refused."""
    rng = np.random.default_rng(seed)
    rows, columns = np.mgrid[0:320, 0:880]
    image = 64.0 + rng.normal(0.0, 3.0, size=rows.shape)
    marks = []
    for index, (column, label, accepted) in enumerate(
        ((110 + 6 * step, "\u22121", True), (430 + 5 * step, "0", True),
         (700 + 2 * step, "+1", True), (300, "off its track", False))
    ):  # fmt: skip
        height = 3000.0 if label == "0" else 400.0
        distance2 = (columns - column) ** 2 + (rows - 150 - 8 * index) ** 2
        image += height * np.exp(-distance2 / 32.0)
        marks.append(FrameMark(float(column), 150.0 + 8 * index, label, accepted))
    counts = np.clip(image, 0, 4095).astype(np.uint16)
    return FrameShown(counts, step, -40.0 + 4.0 * step, 20.0, tuple(marks))


def build_context(*, part_name: str = "shim-830") -> ReportContext:
    """A complete context of a simulated run."""
    return ReportContext(
        part=PartFacts(
            part=part_name,
            serial="S-0147",
            lot="L-22",
            side="front",
            place="centre",
            nominal_pitch_nm=830.0,
            lower_nm=829.5,
            upper_nm=831.0,
            note="nickel embossing shim, invented",
        ),
        screen=ScreenFacts(
            half_width_mm=HALF_WIDTH_MM,
            half_height_mm=80.0,
            hole_x_mm=0.0,
            hole_y_mm=0.0,
            hole_diameter_mm=8.0,
        ),
        simulated=True,
        bench_facts=(
            Fact("Bench", "night-bench"),
            Fact("Screen distance", "250 mm, known to 5 mm"),
            Fact("Laser red", "632.9908 nm in vacuum, u 0.0010 nm, 0.9 mW"),
        ),
        run_facts=(
            Fact("Run", "20260301T210000Z_shims"),
            Fact("Recipe", "two-mounts, 61 angles a mount"),
            Fact("Start", "2026-03-01 21:00:00 UTC"),
            Fact("End", "2026-03-02 01:12:40 UTC"),
        ),
        gate_history=(
            GateRow("2026-03-01 20:59:58 UTC", "arm", "dark", "rehearsal permit"),
            GateRow("2026-03-01 21:00:00 UTC", "all checks passed", "armed", ""),
            GateRow("2026-03-01 21:00:03 UTC", "request", "emitting", "step 0"),
            GateRow("2026-03-02 01:12:40 UTC", "end of run", "dark", ""),
        ),
        frames=tuple(build_frame(step, seed=step) for step in (0, 4, 8, 12, 16, 20)),
        cautions=("The wavelength was not measured in this run.",),
        ledger_entries=214,
        ledger_head="a3" * 32,
    )


def build_table_result() -> PitchResult:
    """Five rows typed with a ruler: a percent-level result without a tolerance."""
    full = build_result(mounts=(0.0,))
    keep = np.flatnonzero(np.abs(full.incidence_deg - 20.0) < 3.0)[:5]
    return replace(
        full,
        pitch_nm=833.17,
        u_pitch_nm=9.13,
        U_pitch_nm=26.2,
        k=2.87,
        dof=3.9,
        decision=Decision(None, "no tolerance was given", None, None, None),
        warnings=(
            "percent-level result: one angle only, the screen distance limits it",
        ),
        table=full.table.take(keep),
        incidence_deg=full.incidence_deg[keep],
        fitted_x_mm=full.fitted_x_mm[keep],
        fitted_y_mm=full.fitted_y_mm[keep],
        residual_x=full.residual_x[keep],
        residual_y=full.residual_y[keep],
        steps_used=len(set(full.table.step[keep].tolist())),
        orders_used=tuple(sorted({int(m) for m in full.table.order[keep]})),
        spots_used=len(keep),
        rejected=(),
        pitches_seen=(),
        nuisance=full.nuisance[:1],
        budget=(
            BudgetLine("screen distance", "B", 8.9),
            BudgetLine("ruler readings", "A", 2.04),
        ),
    )
