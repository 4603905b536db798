"""The pictures: well formed, repeatable, whole for one spot and for many."""

import struct
import xml.etree.ElementTree as ElementTree
from dataclasses import replace

import matplotlib
import numpy as np
import pytest
from result_builder import (
    build_context,
    build_frame,
    build_result,
    build_table_result,
)

from pitchsweep.analysis.budget_picture import MOST_BARS, budget_shares
from pitchsweep.analysis.frame_strip import log_grey, reduced, spread
from pitchsweep.analysis.picture_style import drawable, order_colour, order_marker
from pitchsweep.analysis.pictures import (
    budget_svg,
    frames_png,
    pitches_seen_svg,
    residuals_svg,
    summary_png,
    tracks_svg,
)
from pitchsweep.analysis.records import BudgetLine, PitchResult, PitchSeen
from pitchsweep.analysis.report_context import ReportContext, ScreenFacts
from pitchsweep.analysis.track_picture import broken_line, rejected_places

SCREEN = build_context().screen


def vector_pictures(result: PitchResult) -> list[str]:
    return [
        tracks_svg(result, SCREEN),
        residuals_svg(result),
        pitches_seen_svg(result),
        budget_svg(result),
    ]


def empty_result() -> PitchResult:
    full = build_table_result()
    none = np.array([], dtype=np.int64)
    return replace(
        full,
        table=full.table.take(none),
        incidence_deg=full.incidence_deg[none],
        fitted_x_mm=full.fitted_x_mm[none],
        fitted_y_mm=full.fitted_y_mm[none],
        residual_x=full.residual_x[none],
        residual_y=full.residual_y[none],
        budget=(),
    )


def one_spot_result() -> PitchResult:
    full = build_table_result()
    one = np.array([0])
    return replace(
        full,
        table=full.table.take(one),
        incidence_deg=full.incidence_deg[one],
        fitted_x_mm=full.fitted_x_mm[one],
        fitted_y_mm=full.fitted_y_mm[one],
        residual_x=full.residual_x[one],
        residual_y=full.residual_y[one],
    )


@pytest.mark.parametrize(
    "result",
    [
        build_result(),
        build_result(lasers=("red", "violet"), mounts=(0.0, 90.0)),
        build_table_result(),
        one_spot_result(),
        empty_result(),
    ],
    ids=["two mounts", "two lasers", "table", "one spot", "no spot"],
)
def test_vector_pictures_are_well_formed(result: PitchResult) -> None:
    for svg in vector_pictures(result):
        assert ElementTree.fromstring(svg).tag.endswith("svg")
    assert summary_png(result, ReportContext()).startswith(b"\x89PNG")


def test_equal_input_gives_equal_bytes_whatever_the_users_settings() -> None:
    result, context = build_table_result(), build_context()
    before = [*vector_pictures(result), summary_png(result, context)]
    with matplotlib.rc_context({"font.size": 30.0, "axes.facecolor": "black"}):
        after = [*vector_pictures(result), summary_png(result, context)]
        assert matplotlib.rcParams["font.size"] == 30.0
    assert before == after
    assert frames_png(context.frames[:1]) == frames_png(context.frames[:1])


def test_no_picture_holds_a_date_or_an_author() -> None:
    for svg in vector_pictures(build_table_result()):
        assert "<dc:date>" not in svg and "<dc:creator>" not in svg
    png = summary_png(build_table_result(), build_context())
    assert b"tEXt" not in png


def test_many_spots_do_not_make_a_large_picture() -> None:
    result = build_result(lasers=("red", "violet"), mounts=(0.0, 90.0, 180.0, 270.0))
    many = np.tile(np.arange(len(result.table)), 8)
    large = replace(
        result,
        table=result.table.take(many),
        incidence_deg=result.incidence_deg[many],
        fitted_x_mm=result.fitted_x_mm[many],
        fitted_y_mm=result.fitted_y_mm[many],
        residual_x=result.residual_x[many],
        residual_y=result.residual_y[many],
    )
    assert len(many) > 4000
    assert len(residuals_svg(large)) < 1_500_000


def test_the_summary_has_its_stated_size() -> None:
    png = summary_png(build_result(), build_context())
    width, height = struct.unpack(">II", png[16:24])
    assert (width, height) == pytest.approx((1260, 787), abs=2)


def test_spots_not_used_are_drawn_where_their_angle_is_known() -> None:
    result = build_result()
    in_mm = [spot for spot in result.rejected if spot.unit == "mm"]
    steps = set(result.table.step.tolist())
    assert len(rejected_places(result, SCREEN).x_mm) == sum(
        spot.step in steps for spot in in_mm
    )
    mapped = ScreenFacts(220.0, 80.0, 0.0, 0.0, 8.0, 0.5, 640.0, 88.0)
    places = rejected_places(result, mapped)
    assert len(places.x_mm) == sum(spot.step in steps for spot in result.rejected)
    # 641.2 px on a map of 0.5 mm a pixel centred at 640 px
    assert np.isclose(places.x_mm, 0.6).sum() == 6


def test_a_step_with_two_angles_has_no_known_angle() -> None:
    result = build_result()
    moved = result.table.stage_deg + np.linspace(0.0, 1.0, len(result.table))
    table = replace(result.table, step=0 * result.table.step, stage_deg=moved)
    rejected = tuple(replace(spot, step=0) for spot in result.rejected)
    unclear = replace(result, table=table, rejected=rejected)
    assert len(rejected_places(unclear, SCREEN).x_mm) == 0


def test_lines_break_where_a_track_is_interrupted() -> None:
    angle = np.array([0.0, 1.0, 2.0, 12.0, 13.0])
    line_angle, line_x = broken_line(angle, 2.0 * angle)
    assert np.flatnonzero(np.isnan(line_angle)).tolist() == [3]
    assert np.array_equal(line_x, 2.0 * line_angle, equal_nan=True)


def test_limits_are_drawn_near_and_far() -> None:
    near = replace(
        build_result(),
        decision=replace(build_result().decision, lower_nm=830.38, upper_nm=830.5),
    )
    assert pitches_seen_svg(near) != pitches_seen_svg(build_result())


def test_a_subset_without_a_pitch_is_left_out() -> None:
    lone = PitchSeen("order +1", np.nan, np.nan, np.nan, np.nan, 3)
    full = build_result()
    alone = pitches_seen_svg(replace(full, pitches_seen=(lone,)))
    ElementTree.fromstring(alone)
    assert alone == pitches_seen_svg(replace(full, pitches_seen=()))
    beside = replace(full, pitches_seen=(*full.pitches_seen, lone))
    assert pitches_seen_svg(beside) == pitches_seen_svg(full)


def test_shares_add_up_and_fall() -> None:
    shares = [share for _, share in budget_shares(build_result().budget)]
    assert sum(shares) == pytest.approx(1.0)
    assert shares == sorted(shares, reverse=True)
    many = tuple(BudgetLine(f"source {i}", "B", 1.0 + i) for i in range(3 * MOST_BARS))
    ElementTree.fromstring(budget_svg(replace(build_result(), budget=many)))


def test_reduced_frames_keep_their_brightest_pixel() -> None:
    image = np.zeros((30, 50), dtype=np.uint16)
    image[17, 33] = 4095
    small, block = reduced(image, 10)
    assert block == 5
    assert np.argwhere(small == 4095).tolist() == [[3, 6]]


def test_grey_runs_from_zero_to_one() -> None:
    grey = log_grey(build_frame(0, seed=1).image)
    assert grey.min() == 0.0 and grey.max() == 1.0
    assert log_grey(np.full((4, 4), 7, dtype=np.uint16)).max() == 0.0


def test_a_strip_takes_six_frames_of_many() -> None:
    frames = tuple(build_frame(step, seed=step) for step in range(9))
    chosen = [frame.step for frame in spread(frames, 6)]
    assert (chosen[0], chosen[-1], len(chosen)) == (0, 8, 6)
    assert frames_png(frames[:1]).startswith(b"\x89PNG")
    with pytest.raises(ValueError, match="at least one"):
        frames_png(())


def test_orders_differ_in_colour_and_shape() -> None:
    assert len({order_colour(m) for m in range(-4, 5)}) == 9
    assert [order_marker(m) for m in (-2, 0, 2)] == ["v", "o", "^"]


def test_text_that_the_font_lacks_is_replaced() -> None:
    assert drawable("shim\n部品 α") == "shim ?? α"
    assert len(drawable("x" * 100)) == 60
