"""What the figures show, asked of the drawn artists; and the same bytes every time."""

import io
import struct
import sys
import zlib
from dataclasses import replace
from fractions import Fraction

import pytest
from matplotlib.figure import Figure

from harmonic_planner.report import series
from harmonic_planner.report.figures import draw_comb, draw_response, stage_figures

from plan_fixture import buffer_stage, doubler, example_plan, levels, requirement, tripler


def comb_axes(index: int):
    axes = Figure().add_subplot()
    draw_comb(series.comb(example_plan(), index), axes)
    return axes


def response_axes(index: int, plan=None):
    axes = Figure().add_subplot()
    draw_response(series.response(plan or example_plan(), index), axes)
    return axes


def drawn(axes, label: str) -> list[tuple[float, float]]:
    """Points of the curve with that label."""
    curve = next(line for line in axes.get_lines() if line.get_label() == label)
    return [(float(x), float(y)) for x, y in zip(*curve.get_data(), strict=True)]


def legend(axes) -> list[str]:
    return [text.get_text() for text in axes.get_legend().get_texts()]


def boxes(axes) -> list[tuple[float, float, float]]:
    """Left edge, width and height of each rejection drawn."""
    return [(p.get_x(), p.get_width(), p.get_height()) for p in axes.patches if p.get_hatch() == "////"]


def test_comb_shows_lines_before_and_after_at_their_frequencies():
    axes = comb_axes(0)
    assert drawn(axes, "before the filter") == [(20.0, 8.5), (40.0, -22.0), (80.0, -25.5), (100.0, -6.0)]
    assert drawn(axes, "stage output (after filter, amplifier)") == [
        (20, -52.0),
        (40, -61.0),
        (80, -58.0),
        (100, -60.25),
    ]
    assert drawn(axes, "carrier (line 3)") == [(60.0, 0.0)]


def test_comb_shows_what_the_budget_allows():
    # Level before the filter less the rejection required: 8.5 - 55, -22 - 36, -25.5 - 30.
    assert drawn(comb_axes(0), "allowed by the budget") == [(20.0, -46.5), (40.0, -58.0), (80.0, -55.5)]


def test_comb_of_the_last_stage_shows_the_output_limit_and_no_other_does():
    assert drawn(comb_axes(2), "limit") == [(60.0, -50.0), (100.0, -50.0), (140.0, -50.0)]
    assert "limit" not in legend(comb_axes(0))


def test_comb_of_a_tapped_stage_shows_the_limits_of_the_tap():
    plan = example_plan()
    tapped = replace(plan.stages[0], limited_lines=(replace(plan.output.lines[1], line=Fraction(4), limit_dbc=-62.0),))
    axes = Figure().add_subplot()
    draw_comb(series.comb(replace(plan, stages=(tapped, *plan.stages[1:])), 0), axes)
    assert drawn(axes, "limit") == [(80.0, -62.0)]


def test_comb_has_units_on_both_axes_and_names_its_lines():
    axes = comb_axes(0)
    assert (axes.get_xlabel(), axes.get_ylabel()) == ("Frequency (MHz)", "Level (dBc)")
    assert {text.get_text() for text in axes.texts} == {"1", "2", "4", "5"}
    assert "first tripler" in axes.get_title()


def test_comb_leaves_out_what_lies_under_its_floor_but_never_a_limit():
    comb = series.comb(example_plan(), 1)
    assert comb.y_min_dbc <= min(mark.level_dbc for mark in comb.allowed) - 10
    assert "9" not in {mark.name for mark in series.comb(example_plan(), 0).before}


def test_names_that_would_cover_each_other_are_left_out_the_weaker_ones():
    plan = example_plan()
    stage = replace(tripler(), device_lines=levels(k1=8.5, k2=-22.0, k201_100=-30.0, k5=-6.0), output_lines=())
    named = series.comb(replace(plan, stages=(stage, *plan.stages[1:])), 0).named
    assert [mark.name for mark in named] == ["1", "5", "2"]


def test_requirements_that_stand_close_name_only_the_highest():
    plan = example_plan()
    needs = (requirement("5", 12.0, 20.0), requirement("501/100", 15.0, 20.0), requirement("12", 30.0, 40.0))
    stage = replace(doubler(), filter=replace(doubler().filter, requirement=needs))
    axes = response_axes(1, replace(plan, stages=(plan.stages[0], stage, plan.stages[2])))
    assert {text.get_text() for text in axes.texts} == {"501/100", "12"}
    assert len(boxes(axes)) == 3


def test_each_kind_of_line_has_a_marker_of_its_own():
    markers = [line.get_marker() for line in comb_axes(1).get_lines()]
    assert len(set(markers)) == len(markers) >= 4


def test_response_draws_each_rejection_over_the_span_of_its_line():
    plan = example_plan()
    needs = [need for need in plan.stages[1].filter.requirement if need.required_db > 0]
    expected = [
        (need.frequency_hz[0] / 1e6, (need.frequency_hz[1] - need.frequency_hz[0]) / 1e6, need.required_db)
        for need in needs
    ]
    assert boxes(response_axes(1)) == [pytest.approx(box) for box in expected]


def test_response_curve_is_relative_to_midband():
    assert drawn(response_axes(0), "as built") == [
        (10.0, 78.75),
        (40.0, 40.75),
        (60.0, 0.0),
        (80.0, 32.75),
        (200.0, 88.75),
    ]


def test_response_marks_a_missed_requirement_apart():
    axes = response_axes(1)
    assert drawn(axes, "the same, less than required") == [(100.0, 11.5)]
    assert [x for x, _ in drawn(axes, "as built at that line: worst of span, drift, leakage")] == [60.0, 240.0]
    assert "the same, less than required" not in legend(response_axes(0))


def test_a_rejection_beyond_the_axis_is_drawn_at_its_end():
    axes = response_axes(1)
    bottom, _ = axes.get_ylim()
    assert drawn(axes, "as built at that line: worst of span, drift, leakage")[-1][1] == bottom


def test_response_has_units_says_the_filter_and_shows_every_requirement_within_its_limits():
    axes = response_axes(1)
    assert axes.get_xlabel() == "Frequency (MHz)"
    assert axes.get_ylabel() == "Attenuation relative to midband (dB)"
    assert "Butterworth of order 4, ladder-series, 9.6 MHz at 120 MHz" in axes.get_title()
    low, high = axes.get_xlim()
    deepest, _ = axes.get_ylim()
    assert all(low <= x <= x + width <= high and height < deepest for x, width, height in boxes(axes))


def test_a_stage_without_filter_says_so():
    axes = response_axes(2)
    assert "No filter: the scenario asks for none" in axes.get_title()
    assert boxes(axes) == []


def test_two_figures_a_stage_all_png_and_the_same_bytes_again():
    first, second = stage_figures(example_plan()), stage_figures(example_plan())
    assert sorted(first) == [
        "01_first_tripler_comb.png",
        "01_first_tripler_response.png",
        "02_cmd_bold_x_doubler_comb.png",
        "02_cmd_bold_x_doubler_response.png",
        "03_buffer_comb.png",
        "03_buffer_response.png",
    ]
    assert first == second


def chunks(png: bytes) -> list[bytes]:
    """Names of the chunks of a PNG file (ISO/IEC 15948), each checked against its sum."""
    stream = io.BytesIO(png)
    assert stream.read(8) == b"\x89PNG\r\n\x1a\n"
    names = []
    while head := stream.read(8):
        size, name = struct.unpack(">I4s", head)
        body = stream.read(size)
        assert struct.unpack(">I", stream.read(4))[0] == zlib.crc32(name + body)
        names.append(name)
    return names


def test_figures_carry_neither_date_nor_program():
    (image, *_) = stage_figures(replace(example_plan(), stages=(buffer_stage(),))).values()
    assert {b"tEXt", b"iTXt", b"zTXt", b"tIME"}.isdisjoint(chunks(image))
    assert chunks(image)[-1] == b"IEND"


def test_a_name_the_font_lacks_and_one_that_looks_like_mathematics_are_drawn_all_the_same():
    stages = tuple(replace(buffer_stage(), name=name) for name in ("倍频", "$x^{", "\x1b[2J"))
    assert len(stage_figures(replace(example_plan(), stages=stages))) == 6


def test_drawing_leaves_the_users_settings_and_pyplot_alone():
    import matplotlib as mpl

    before = dict(mpl.rcParams)
    loaded = "matplotlib.pyplot" in sys.modules
    stage_figures(replace(example_plan(), stages=(buffer_stage(),)))
    assert dict(mpl.rcParams) == before
    assert ("matplotlib.pyplot" in sys.modules) == loaded
