"""What a random bench really does lies in the map; more power never refuses less."""

import numpy as np
import pytest
from beam_map_builders import ALL_ROUND, job_within, surface, with_laser
from builders import demo_job
from hypothesis import given, settings
from hypothesis import strategies as st

from pitchsweep.analysis.bench_geometry import N_LOCAL, Local, order_direction
from pitchsweep.analysis.order_visibility import wavelength_over_pitch
from pitchsweep.analysis.records import FloatArray
from pitchsweep.configs.enclosure_model import Surface
from pitchsweep.configs.job_model import Job
from pitchsweep.safety.beam_cones import order_cones, reached, spread_of
from pitchsweep.safety.beam_map import BeamKind, beam_map, refusals
from pitchsweep.safety.run_refusals import why_refused
from pitchsweep.safety.surroundings import surroundings_of

LOCALS = 4000
COARSE_DEG = 9.0


def tiles(step_deg: float) -> list[Surface]:
    """Sixty tiles round the part, each a stop of its own, all directions covered."""
    return [
        surface(f"t{west:.0f}.{low:.0f}", west, west + step_deg, low, low + 36.0)
        for west in np.arange(-180.0, 180.0, step_deg)
        for low in np.arange(-90.0, 90.0, 36.0)
    ]


def random_bench(job: Job, laser: str, seed: int) -> tuple[FloatArray, FloatArray]:
    """Random locals (N, 15) within three sigma, grooves any way round; incidences."""
    draw = np.random.default_rng(seed)
    bench, part = job.bench, job.part
    local = np.zeros((LOCALS, N_LOCAL))

    def off(scale: float) -> FloatArray:
        return np.clip(draw.normal(size=LOCALS), -3.0, 3.0) * scale

    planned = draw.integers(-45, 46, LOCALS).astype(float)
    local[:, Local.INCIDENCE] = np.radians(planned + off(bench.stage.u_zero_deg))
    local[:, Local.AZIMUTH] = draw.uniform(0.0, 2.0 * np.pi, LOCALS)
    local[:, Local.TILT] = off(part.u_tilt_mrad * 1e-3)
    local[:, Local.ELEVATION] = off(bench.beam.u_elevation_mrad * 1e-3)
    within = part.nominal_within_percent * 1e-2
    ratio = wavelength_over_pitch(bench, part, laser)
    ratios = ratio / (1.0 + draw.uniform(-0.98, 0.98, LOCALS) * within)
    local[:, Local.Q] = draw.integers(-3, 4, LOCALS) * ratios
    return local, planned


def angles_deg(directions: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Azimuth and elevation of unit vectors (N, 3)."""
    x, y, z = directions.T
    return np.degrees(np.arctan2(x, z)), np.degrees(np.arcsin(np.clip(y, -1.0, 1.0)))


@pytest.mark.parametrize("name", ["shims-spots", "track-740-green"])
@pytest.mark.parametrize("seed", [0, 1])
def test_what_a_random_bench_sends_out_is_in_the_map(name: str, seed: int) -> None:
    """The fit's own ray formula, a code of its own, against the cones of the map."""
    sweep = {"start_deg": -45.0, "stop_deg": 45.0}
    job = demo_job(name, recipe=sweep)
    laser = job.recipe.lasers[0]
    around = surroundings_of(tiles(30.0))
    around_job = job_within(tiles(30.0), name=name, margin_deg=0.0)
    around_job = around_job.model_copy(update={"recipe": job.recipe})
    meets = {
        (b.at.incidence_deg, b.order): set(b.meets)
        for b in beam_map(around_job).beams
        if b.kind is BeamKind.ORDER
    }
    local, planned = random_bench(job, laser, seed)
    directions, squared = order_direction(local)
    ratio = wavelength_over_pitch(job.bench, job.part, laser)
    order = np.round(local[:, Local.Q] / ratio).astype(int)
    azimuth, elevation = angles_deg(directions)
    hit = around.met_by_cones(azimuth, elevation, np.zeros_like(azimuth))
    names = {around.bit_of(i): s.name for i, s in enumerate(around.surfaces)}
    judged = 0
    for i in np.flatnonzero(squared > 0.0):
        if int(hit[i]) in names:
            judged += 1
            assert names[int(hit[i])] in meets[planned[i], int(order[i])]
    assert judged > LOCALS / 4


@pytest.mark.parametrize("through", [False, True])
@pytest.mark.parametrize("name", ["shims-spots", "track-1600-violet"])
def test_benches_at_three_sigma_stay_within_the_cones(name: str, through: bool) -> None:
    """Everything off by three sigma one way or the other, grooves any way round."""
    job = demo_job(name)
    laser = job.recipe.lasers[0]
    ratio = wavelength_over_pitch(job.bench, job.part, laser)
    spread = spread_of(job.bench, job.part, laser)
    incidence = np.arange(-60.0, 61.0, 20.0)
    cones = order_cones(
        incidence, np.zeros_like(incidence), ratio, spread, through=through, ghost=False
    )
    outside = 0.0
    for row, a_deg in enumerate(incidence):
        for order in range(cones.leaves.shape[1]):
            rays = corner_rays(job, laser, float(a_deg), order, through)
            lit = cones.leaves[row, order]
            if not len(rays):
                continue
            middles = vectors(
                cones.azimuth_deg[row, order, lit], cones.elevation_deg[row, order, lit]
            )
            away = np.degrees(np.arccos(np.clip(rays @ middles.T, -1.0, 1.0)))
            past = (away - cones.half_deg[row, order, lit][None, :]).min(axis=1)
            outside = max(outside, float(past.max()))
    assert outside == 0.0


def corner_rays(
    job: Job, laser: str, incidence_deg: float, order: int, through: bool
) -> FloatArray:
    """Unit vectors (N, 3) of an order where every doubt is at three sigma."""
    bench, part = job.bench, job.part
    draw = np.random.default_rng(3)
    count = 400
    signs = draw.choice([-3.0, 3.0], size=(3, count))
    local = np.zeros((count, N_LOCAL))
    a = np.radians(incidence_deg + signs[0] * bench.stage.u_zero_deg)
    tilt = signs[1] * part.u_tilt_mrad * 1e-3
    local[:, Local.INCIDENCE] = a
    local[:, Local.TILT] = tilt
    local[:, Local.ELEVATION] = signs[2] * bench.beam.u_elevation_mrad * 1e-3
    local[:, Local.AZIMUTH] = draw.uniform(0.0, 2.0 * np.pi, count)
    within = part.nominal_within_percent * 1e-2 * draw.choice([-1.0, 1.0], count)
    ratio = wavelength_over_pitch(bench, part, laser)
    local[:, Local.Q] = order * ratio * (1.0 + 0.999 * within)
    out, squared = order_direction(local)
    normal = np.stack(
        [np.sin(a) * np.cos(tilt), np.sin(tilt), np.cos(a) * np.cos(tilt)], axis=-1
    )
    if through:
        out = out - 2.0 * np.sum(out * normal, axis=1)[:, None] * normal
    return np.asarray(out[squared > 0.0])


def vectors(azimuth_deg: FloatArray, elevation_deg: FloatArray) -> FloatArray:
    """Unit vectors (N, 3) of directions (N,)."""
    a, e = np.radians(azimuth_deg), np.radians(elevation_deg)
    return np.stack([np.cos(e) * np.sin(a), np.sin(e), np.cos(e) * np.cos(a)], axis=-1)


def test_the_picture_s_reach_is_that_of_the_cones() -> None:
    """Directions inside the cones' middles are reached by the inverse formula."""
    job = demo_job("track-740-green")
    spread = spread_of(job.bench, job.part, "green")
    ratio = wavelength_over_pitch(job.bench, job.part, "green")
    incidence, width = np.array([-30.0, 0.0, 62.0]), np.zeros(3)
    for through in (False, True):
        cones = order_cones(
            incidence, width, ratio, spread, through=through, ghost=False
        )
        place = (cones.azimuth_deg[cones.leaves], cones.elevation_deg[cones.leaves])
        assert reached(*place, incidence, width, ratio, spread).all()
    # Zero order only, seen from far off its cone: not reached.
    far = (np.array([120.0]), np.array([0.0]))
    assert not reached(*far, incidence[:2], width[:2], 3.0, spread).any()


@settings(max_examples=60, deadline=None)
@given(
    azimuth=st.floats(-180.0, 180.0),
    elevation=st.floats(-90.0, 90.0),
    half=st.floats(0.0, 60.0),
    data=st.randoms(use_true_random=False),
)
def test_a_cone_meets_all_that_any_ray_in_it_meets(
    azimuth: float, elevation: float, half: float, data: np.random.Generator
) -> None:
    around = surroundings_of(tiles(30.0))
    whole = around.met_by_cones(*(np.array([v]) for v in (azimuth, elevation, half)))[0]
    axis, side, other = _frame(azimuth, elevation)
    lean = np.radians(half) * np.array([data.uniform(0.0, 1.0) for _ in range(200)])
    turn = np.array([data.uniform(0.0, 2.0 * np.pi) for _ in range(200)])
    rays = (
        np.cos(lean)[:, None] * axis
        + (np.sin(lean) * np.cos(turn))[:, None] * side
        + (np.sin(lean) * np.sin(turn))[:, None] * other
    )
    inner = around.met_by_cones(*angles_deg(rays), np.zeros(len(rays)))
    # A ray that meets an edge to the last bit touches both neighbours.
    single = inner[(inner & (inner - 1)) == 0]
    assert (single & ~whole == 0).all()


def _frame(azimuth: float, elevation: float) -> tuple[FloatArray, ...]:
    a, e = np.radians(azimuth), np.radians(elevation)
    axis = np.array([np.cos(e) * np.sin(a), np.sin(e), np.cos(e) * np.cos(a)])
    side = np.array([np.cos(a), 0.0, -np.sin(a)])
    return axis, side, np.cross(axis, side)


@settings(max_examples=25, deadline=None)
@given(
    west=st.floats(-180.0, 170.0),
    width=st.floats(1.0, 360.0),
    low=st.floats(-90.0, 80.0),
    height=st.floats(1.0, 180.0),
    density=st.floats(0.0, 6.0),
    bears_mw=st.floats(0.1, 100.0),
    powers=st.tuples(st.floats(0.01, 400.0), st.floats(0.01, 400.0)),
)
def test_more_power_never_refuses_less(
    west: float,
    width: float,
    low: float,
    height: float,
    density: float,
    bears_mw: float,
    powers: tuple[float, float],
) -> None:
    window = surface(
        "window",
        west,
        west + width,
        low,
        min(90.0, low + height),
        what="window",
        optical_density=density,
    )
    walls = ALL_ROUND.model_copy(update={"max_power_mw": bears_mw})
    job = job_within([window, walls], step_deg=COARSE_DEG, power_ceiling_mw=200.0)
    less, more = (
        with_laser(job, "red", power_mw=power, full_drive_mw=None)
        for power in sorted(powers)
    )
    faults = [
        {(b.kind, b.order, b.at) for b in beam_map(j).beams if b.fault}
        for j in (less, more)
    ]
    assert faults[0] <= faults[1]
    assert not why_refused(less) or why_refused(more)


@settings(max_examples=20, deadline=None)
@given(
    west=st.floats(-180.0, 170.0),
    width=st.floats(1.0, 359.0),
    low=st.floats(-90.0, 80.0),
    height=st.floats(1.0, 170.0),
)
def test_one_more_stop_behind_the_others_never_refuses_more(
    west: float, width: float, low: float, height: float
) -> None:
    belt = surface("belt", -180.0, 180.0, -30.0, 30.0)
    extra = surface("extra", west, west + width, low, min(90.0, low + height))
    before, after = (
        {
            (b.kind, b.order, b.at)
            for b in beam_map(job_within(surfaces, step_deg=COARSE_DEG)).beams
            if b.fault
        }
        for surfaces in ([belt], [belt, extra])
    )
    assert after <= before
    closed = job_within([belt, extra, ALL_ROUND], step_deg=COARSE_DEG)
    assert refusals(beam_map(closed)) == ()
