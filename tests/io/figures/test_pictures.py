"""Each picture shows its values: right places, units on each axis, marks where they belong."""

import re
from dataclasses import replace

import numpy as np
import pytest
from gainwright.design.compensator import open_loop
from gainwright.design.locus.condition import working
from gainwright.design.loop_response import loop_response
from gainwright.io.figures.gain_ribbon import gain_ribbon, ribbon_span
from gainwright.io.figures.gallery import gallery
from gainwright.io.figures.headroom_bars import Headroom, headroom_bars
from gainwright.io.figures.held_out import held_out
from gainwright.io.figures.locus import locus, tags, view_of
from gainwright.io.figures.log_and_fit import log_and_fit
from gainwright.io.figures.look import colour
from gainwright.io.figures.margins import margins
from gainwright.io.figures.step import predicted_step

UNITS = {"command_unit": "V", "response_unit": "mm"}


def words_of(figure):
    figure.draw_without_rendering()
    found = [text for axes in figure.axes for text in axes.texts]
    return " | ".join(text.get_text() for text in found)


def line_in(axes, role):
    return next(line for line in axes.lines if line.get_color() == colour(role) and len(line.get_xdata()) > 50)


def test_a_fitted_record_shows_command_response_and_residual_each_with_its_unit(made):
    """Three strips over one time axis; the residual is measured less model."""
    run = made.fit.runs[0]
    figure = log_and_fit(run, **UNITS)
    command, response, residual = figure.axes
    assert [axes.get_ylabel() for axes in figure.axes] == ["command\n(V)", "response (mm)", "residual\n(mm)"]
    assert residual.get_xlabel() == "time from the first sample (s)"
    assert len({axes.get_xlim() for axes in figure.axes}) == 1
    assert np.array_equal(line_in(response, "model").get_ydata(), run.model)
    shown = line_in(residual, "response").get_ydata()
    assert np.array_equal(shown, run.response - run.model)
    assert line_in(command, "command").get_ydata()[0] == run.command[0]


def test_a_short_record_is_drawn_in_milliseconds(made):
    """0.2 s of record: the axis reads 0 to 200 ms."""
    run = made.fit.runs[0]
    short = replace(
        run, time=run.time[:200] / 20.0, command=run.command[:200], response=run.response[:200], model=run.model[:200]
    )
    axes = log_and_fit(short, **UNITS).axes[-1]
    assert axes.get_xlabel() == "time from the first sample (ms)"
    assert axes.get_xlim()[1] == pytest.approx(1e3 * short.time[-1])


def test_lost_samples_leave_a_record_drawable(made):
    """NaN at both ends and in the middle, where labels are placed, too."""
    run = made.fit.runs[0]
    response = run.response.copy()
    response[:20] = response[-20:] = response[200:260] = np.nan
    assert "measured" in words_of(log_and_fit(replace(run, response=response), **UNITS))


def test_a_held_out_record_lies_over_its_band(made):
    """Measured, predicted and both edges of the band; no per cent of fit anywhere."""
    compared = made.closing[0]
    figure = held_out(compared, **UNITS)
    axes = figure.axes[1]
    assert np.array_equal(line_in(axes, "response").get_ydata(), compared.response)
    in_model_colour = [line.get_ydata() for line in axes.lines if line.get_color() == colour("model")]
    assert any(np.array_equal(values, compared.predicted) for values in in_model_colour)
    edges = axes.collections[0].get_paths()[0].vertices[:, 1]
    assert (edges.min(), edges.max()) == pytest.approx((compared.low.min(), compared.high.max()))
    assert "95 % band" in words_of(figure)
    assert axes.get_legend() is None


def test_the_predicted_step_marks_what_was_asked(made):
    """20 mm from 120 mm: overshoot 10 % at 142 mm; +-2 % of 20 mm about 140 mm from 1.6 s on."""
    figure = predicted_step(made.design.trajectory, limits=made.rig.limits, judged=made.design.judged, **UNITS)
    above, below = figure.axes
    marks = [line for line in above.lines if line.get_color() == colour("limit")]
    assert any(np.all(np.asarray(line.get_ydata()) == 142.0) for line in marks)
    bracket = next(line for line in marks if len(line.get_xdata()) == 4)
    assert min(bracket.get_xdata()) == pytest.approx(1.6)
    assert sorted(set(bracket.get_ydata())) == pytest.approx([139.6, 140.4])
    assert (above.get_ylabel(), below.get_ylabel()) == ("response (mm)", "command\n(V)")
    assert "(s)" in below.get_xlabel()


def test_a_long_quiet_end_is_left_out_of_the_predicted_step(made):
    """35 s predicted, nearly all at rest: the picture ends soon after the asked 1.6 s, and never before."""
    old = made.design.trajectory
    extra = np.arange(1, 8000) * 0.004 + old.time[-1]
    longer = {
        name: np.concatenate([getattr(old, name), np.full(len(extra), getattr(old, name)[-1])])
        for name in vars(old)
        if name != "time"
    }
    longer["time"] = np.concatenate([old.time, extra])
    figure = predicted_step(type(old)(**longer), limits=made.rig.limits, judged=made.design.judged, **UNITS)
    assert 1.5 * 1.6 < figure.axes[0].get_xlim()[1] < 3.0 * 1.6


def test_a_limit_far_from_the_prediction_does_not_squeeze_it_and_a_near_one_is_drawn(made):
    """The command stays between 4 and 7 V: -10 V is not drawn, 7.2 V is."""
    limits = replace(made.rig.limits, command_highest=7.2)
    below = predicted_step(made.design.trajectory, limits=limits, **UNITS).axes[1]
    low, high = below.get_ylim()
    assert low > 0.0
    assert high > 7.2
    assert any(np.all(np.asarray(line.get_ydata()) == 7.2) for line in below.lines)


def test_the_ribbon_is_filled_where_a_requirement_holds(made):
    """One row a requirement in order, then all together, then on the plausible plants; edges in K as given."""
    selection = made.design.selection
    axes = gain_ribbon(selection).axes[0]
    filled = {}
    for bar in axes.patches:
        row = bar.get_y() + bar.get_height() / 2
        filled.setdefault(round(row, 3), []).append((bar.get_x(), bar.get_x() + bar.get_width()))
    rows = [filled[place] for place in sorted(filled)]
    low, _ = ribbon_span(selection)
    assert len(rows) == len(selection.rows) + 2
    for row, wanted in (
        (rows[0], [(low, 0.161)]),
        (rows[1], [(0.092, 0.148), (0.152, 0.168)]),
        (rows[-2], selection.intervals),
        (rows[-1], selection.intervals_plausible),
    ):
        assert np.asarray(row) == pytest.approx(np.asarray(wanted))
    assert axes.get_xscale() == "log"


def test_the_ribbon_marks_the_chosen_gain_and_names_its_ends(made):
    """A line at K through all rows, its value with unit, and which way K grows."""
    figure = gain_ribbon(made.design.selection)
    axes = figure.axes[0]
    assert any(list(line.get_xdata()) == [0.13, 0.13] for line in axes.lines)
    said = words_of(figure)
    for word in ("chosen K = 0.13 V/mm", "lower K", "higher K", "settling time", "all together", "on plausible plants"):
        assert word in said
    assert axes.get_xlabel() == "loop gain K (V/mm), logarithmic"


@pytest.mark.parametrize(
    ("intervals", "said"),
    [((), "at no gain"), (((None, None),), "lower K"), (((0.0, 1e9),), "lower K"), (((1e-9, 1e-8),), "lower K")],
)
def test_the_ribbon_can_show_nothing_everything_and_what_lies_elsewhere(made, intervals, said):
    """Empty, unbounded and far-away sets are drawn without warning, and the chosen K stays inside."""
    selection = replace(made.design.selection, intervals=intervals, intervals_plausible=intervals, rows=())
    figure = gain_ribbon(selection)
    low, high = figure.axes[0].get_xlim()
    assert low < selection.loop_gain < high
    assert said in words_of(figure)


@pytest.mark.parametrize(
    ("row", "used"),
    [
        (Headroom("command highest", "command", "V", 3.0, 6.5, 10.0), 0.5),
        (Headroom("command lowest", "command", "V", 3.0, -10.0, -10.0), 1.0),
        (Headroom("command rate", "command", "V/s", 0.0, 300.0, 200.0), 1.5),
        (Headroom("response lowest", "model", "mm", 120.0, 119.0, float("-inf")), None),
        (Headroom("response rate", "model", "mm/s", 0.0, None, None), None),
    ],
)
def test_the_used_share_is_of_the_way_from_the_operating_point_to_the_limit(row, used):
    """(worst - start)/(limit - start), by hand; none where there is no finite limit."""
    assert row.used == (None if used is None else pytest.approx(used))


def test_headroom_bars_are_as_long_as_what_is_used_and_say_what_is_missing():
    """Half of the way is half of the bar; passed, not limited and missing are said in words."""
    rows = [
        Headroom("command highest", "command", "V", 3.0, 6.5, 10.0),
        Headroom("command rate", "command", "V/s", 0.0, 300.0, 200.0),
        Headroom("response lowest", "model", "mm", 120.0, 119.0, float("-inf")),
        Headroom("response rate", "model", "mm/s", 0.0, None, None),
    ]
    figure = headroom_bars(rows)
    assert [bar.get_width() for bar in figure.axes[0].patches] == pytest.approx([0.5, 1.0])
    said = words_of(figure)
    for word in (
        "50 % left: worst 6.5, limit 10 V",
        "PASSED: worst 300, limit 200 V/s",
        "not limited",
        "MISSING LIMIT",
    ):
        assert word in said


def test_the_locus_shows_poles_zeros_vectors_and_the_chosen_point_to_one_scale(made):
    """A vector from each root ends at the point; both axes have one scale and the unit 1/s."""
    loop = open_loop(made.design.gains, made.fit.plant, made.rig.setting)
    found = working(loop, made.design.selection.pole)
    figure = locus((), found, sampled_pole=made.design.selection.sampled_pole)
    axes = figure.axes[0]
    drawn = {
        (complex(line.get_xdata()[0], line.get_ydata()[0]), complex(line.get_xdata()[1], line.get_ydata()[1]))
        for line in axes.lines
        if len(line.get_xdata()) == 2 and line.get_color() in (colour("command"), colour("holds"))
    }
    assert drawn == {(vector.root, found.point) for vector in (*found.poles, *found.zeros)}
    assert [name for name, _ in tags(found)] == ["p1", "p2", "z1"]
    assert (axes.get_xlabel(), axes.get_ylabel()) == ("real part (1/s)", "imaginary part (1/s)")
    box = axes.get_window_extent()
    scales = [span / length for span, length in zip(
        (np.diff(axes.get_xlim())[0], np.diff(axes.get_ylim())[0]), (box.width, box.height), strict=True
    )]  # fmt: skip
    assert scales[0] == pytest.approx(scales[1], rel=1e-3)


def test_a_far_root_does_not_squeeze_the_locus_and_is_named(made):
    """A filter pole at -500 1/s beside a point at 8 1/s stands outside of the window, in words."""
    plant = replace(made.fit.plant, denominator=tuple(np.polymul(made.fit.plant.denominator, (0.002, 1.0))))
    found = working(open_loop(made.design.gains, plant, made.rig.setting), made.design.selection.pole)
    assert view_of(found)[0] > -40.0
    assert "beyond the picture: p1 at -500" in words_of(locus((), found))


def test_no_picture_has_a_legend_a_grid_or_a_filled_region_of_the_plane(made):
    """The picture language: labels at the curves, no grid lines, no shaded forbidden regions."""
    loop = open_loop(made.design.gains, made.fit.plant, made.rig.setting)
    figures = [
        log_and_fit(made.fit.runs[0], **UNITS),
        held_out(made.closing[0], **UNITS),
        predicted_step(made.design.trajectory, limits=made.rig.limits, judged=made.design.judged, **UNITS),
        locus((), working(loop, made.design.selection.pole)),
    ]
    for axes in (axes for figure in figures for axes in figure.axes):
        assert axes.get_legend() is None
        assert not any(line.get_visible() for line in axes.get_xgridlines() + axes.get_ygridlines())
    assert not figures[-1].axes[0].patches
    assert not figures[-1].axes[0].collections


def test_the_margins_are_drawn_as_long_as_they_are(made):
    """The stroke from 0 dB ends on the size curve, the one from -180 deg on the angle curve; values as predicted."""
    response = loop_response(made.design.gains, made.fit.plant, made.fit.plausible, made.rig.setting)
    figure = margins(response)
    size, turn, swell = figure.axes
    strokes = [
        next(line for line in axes.lines if len(line.get_xdata()) == 2 and line.get_linewidth() == 1.6)
        for axes in (size, turn)
    ]
    assert list(strokes[0].get_ydata()) == pytest.approx([0.0, -response.gain_margin.value], abs=0.05)
    assert list(strokes[1].get_ydata()) == pytest.approx([0.0, response.phase_margin.value], abs=0.3)
    said = words_of(figure)
    for word in (f"gain margin {response.gain_margin.value:.3g} dB", "phase margin", "peak sensitivity"):
        assert word in said
    assert swell.get_xlabel() == "angular frequency (rad/s), logarithmic"
    assert [axes.get_ylabel() for axes in figure.axes] == [
        "size of the loop\n(dB)", "angle above\n−180 deg (deg)", "sensitivity\n(ratio)",
    ]  # fmt: skip


def test_the_gallery_holds_every_picture_once_under_a_file_name(made):
    """Names are plain file names, titles say what is seen; a job without a design still has its logs and headroom."""
    names = [picture.name for picture in gallery(made)]
    assert names == ["step", "ribbon", "headroom", "ladder", "log-0", "locus", "margins", "held-out-0"]
    assert all(re.fullmatch(r"[a-z0-9-]+", name) for name in names)
    assert [picture.name for picture in gallery(replace(made, design=None, ladder=None))] == [
        "headroom",
        "log-0",
        "held-out-0",
    ]
