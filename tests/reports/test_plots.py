"""Pictures: the same bytes each time, small, labelled, with errors, and without a trace in the user's settings."""

import io
import subprocess
import sys
import xml.etree.ElementTree as ElementTree
from dataclasses import replace

import matplotlib
import numpy as np
import pytest
from matplotlib.figure import Figure
from matplotlib.image import imread

from quarterturn.reports.palette import FIT, INK, PRINT_INK
from quarterturn.reports.panels import Panel, draw, panels
from quarterturn.reports.plots import MOST_PANELS, figure, pictures, png
from quarterturn.reports.report import Curve, Report

LARGEST_SVG = 60_000


def drawn(*curves: Curve) -> Figure:
    sheet = Figure()
    (panel,) = panels(curves)
    draw(panel, sheet, INK)
    return sheet


def with_points(curve: Curve, points: int) -> Curve:
    x = np.linspace(0, 5, points)
    y = np.exp(-x)
    return replace(
        curve, x=tuple(x.tolist()), y=tuple(y.tolist()), error=tuple((0.1 * y).tolist()), exact=tuple(y.tolist())
    )


def test_pictures_are_the_same_bytes_each_time(sampled):
    first = pictures(sampled), png(sampled)
    assert first == (pictures(sampled), png(sampled))
    assert "<dc:date>" not in first[0][0].svg


def test_settings_of_the_user_neither_change_nor_matter(sampled):
    plain = pictures(sampled)
    with matplotlib.rc_context({"font.size": 30, "axes.facecolor": "red", "text.usetex": True, "lines.linewidth": 9}):
        before = dict(matplotlib.rcParams)
        assert pictures(sampled) == plain
        assert dict(matplotlib.rcParams) == before


def test_pyplot_is_not_imported():
    code = "import quarterturn.reports.bundle, sys; sys.exit('matplotlib.pyplot' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], env={"PYTHONPATH": ":".join(sys.path)}).returncode == 0


@pytest.mark.parametrize("points", [2, 41, 60, 61, 200, 2000])
def test_svg_is_small_and_well_formed(sampled, points):
    correlator, gap = sampled.curves
    history = Curve("h", "h", "draw", tuple(map(float, range(points))), (1.0,) * points, style="history")
    report = replace(sampled, curves=(with_points(correlator, points), with_points(gap, points), history))
    shown = pictures(report)
    assert len(shown) == 2
    for picture in shown:
        assert len(picture.svg) < LARGEST_SVG
        assert ElementTree.fromstring(picture.svg).tag.endswith("svg")


def test_waves_are_small_too(solved):
    (picture,) = pictures(solved)
    assert len(picture.svg) < LARGEST_SVG
    assert picture.words == "wave functions in the potential: V(q), psi_0, psi_1"


def test_paths_share_a_panel_on_a_linear_axis_and_the_potential_carries_its_course():
    x = tuple(np.linspace(0, 1, 50).tolist())
    path = Curve("x(t)", "x(t)", "t", x, tuple(np.exp(5 * np.array(x)).tolist()), style="path")
    potential = Curve("V", "V", "q", x, x, style="potential")
    curves = (path, replace(path, label="y(t)"), potential, replace(potential, label="the path", style="course"))
    first, second = panels(curves)
    assert (first.kind, len(first.curves)) == ("paths", 2)
    assert second.words == "the path in the potential: V, the path"
    sheet = drawn(*curves[:2])
    assert sheet.axes[0].get_yscale() == "linear"
    assert len({line.get_linestyle() for line in sheet.axes[0].lines}) == 2


def test_png_is_transparent(sampled):
    pixels = imread(io.BytesIO(png(sampled)))
    assert pixels.shape[2] == 4
    assert pixels[0, 0, 3] == 0
    assert 0 < (pixels[..., 3] > 0).mean() < 0.3


def test_no_curves_no_picture(sampled):
    bare = replace(sampled, curves=())
    assert (figure(bare), pictures(bare), png(bare)) == (None, (), None)


def test_panels_are_bounded(sampled):
    many = replace(sampled, curves=(sampled.curves[0],) * 20)
    assert len(pictures(many)) == MOST_PANELS
    assert len(figure(many).subfigs) == MOST_PANELS


def test_effective_gap_stands_below_its_correlator_on_the_same_times(sampled):
    above, below = drawn(*sampled.curves).axes
    assert above.get_shared_x_axes().joined(above, below)
    assert (above.get_ylabel(), below.get_ylabel()) == (r"$\langle q(t)\,q(0)\rangle$", r"$E_{\mathrm{eff}}(t)$")
    assert below.get_xlabel() == "$t$"


def test_plateau_is_drawn_over_the_fitted_stretch_and_named(sampled):
    _, below = drawn(*sampled.curves).axes
    (line,) = [line for line in below.lines if line.get_color() == FIT]
    assert line.get_xydata().tolist() == [[0.8, 1.0003], [2.3, 1.0003]]
    assert "fit 1.0003(34)" in [text.get_text() for text in below.texts]


@pytest.mark.parametrize("points", [40, 200])
def test_errors_are_always_visible(sampled, points):
    curve = with_points(sampled.curves[0], points)
    (axes,) = drawn(curve).axes
    low, high = np.array(curve.y) - curve.error, np.array(curve.y) + curve.error
    if points <= 60:
        bars = axes.lines[0].get_ydata().reshape(points, 3)
        assert np.array_equal(bars[:, 0], low)
        assert np.array_equal(bars[:, 1], high)
    else:
        (band,) = axes.collections
        corners = band.get_paths()[0].vertices[:, 1]
        assert {*low, *high} <= set(corners)


def test_logarithmic_only_where_all_values_are_positive(sampled):
    curve = with_points(sampled.curves[0], 20)
    assert drawn(curve).axes[0].get_yscale() == "log"
    noisy = replace(curve, y=(*curve.y[:-1], -0.001))
    assert drawn(noisy).axes[0].get_yscale() == "linear"


def test_error_bar_through_zero_does_not_stretch_a_logarithmic_axis(sampled):
    curve = with_points(sampled.curves[0], 20)
    wide = replace(curve, error=(*curve.error[:-1], 10.0))
    low, high = drawn(wide).axes[0].get_ylim()
    assert low == pytest.approx(np.exp(-5) / 2)
    assert high == pytest.approx(2)


def test_points_beyond_the_axis_are_counted_in_words(sampled):
    gap = sampled.curves[1]
    wild = replace(gap, y=(*gap.y[:-1], 50.0))
    (axes,) = drawn(wild).axes
    y, (low, high) = np.array(wild.y), axes.get_ylim()
    outside = int(((y < low) | (y > high)).sum())
    assert outside >= 1
    assert any(text.get_text().startswith(f"{outside} point") for text in axes.texts)


def test_long_history_is_drawn_by_means_and_says_so():
    values = np.arange(1000.0)
    (axes,) = drawn(Curve("h", "h", "draw", tuple(values), tuple(values), style="history")).axes
    y = axes.lines[0].get_ydata()
    assert y[:2].tolist() == [2, 7]
    assert y.size == 200
    assert [text.get_text() for text in axes.texts] == ["means of 5 points"]


def test_waves_stand_on_their_energies(solved):
    (axes,) = drawn(*solved.curves).axes
    flat = [line.get_ydata()[0] for line in axes.lines if len(set(line.get_ydata().tolist())) == 1]
    assert flat == [0.5, 1.5]
    assert (axes.get_xlabel(), axes.get_ylabel()) == ("$q$", "energy")
    waves = [line.get_ydata() for line in axes.lines if line.get_ydata().size == 161][1:]
    for wave, curve, energy in zip(waves, solved.curves[1:], (0.5, 1.5), strict=True):
        assert np.corrcoef(wave - energy, curve.y)[0, 1] == pytest.approx(1)


def test_a_degenerate_pair_does_not_flatten_the_waves(solved):
    potential, *waves = solved.curves
    pair = [replace(wave, baseline=energy) for wave, energy in zip(waves, (0.5, 0.5 + 1e-9), strict=True)]
    third = replace(waves[0], baseline=4.5)
    (axes,) = drawn(potential, *pair, third).axes
    heights = [np.ptp(line.get_ydata()) for line in axes.lines if line.get_ydata().size == 161][1:]
    assert min(heights) > 0.1


@pytest.mark.parametrize("latex", [r"\undefined{", r"\href{x}{y}", "$", r"\frac"])
def test_latex_that_matplotlib_cannot_set_becomes_plain_notation(latex):
    report = Report("sample", "t", "", "", (), (), (Curve("<q> $", latex, "t", (0.0, 1.0), (1.0, 2.0)),))
    (axes,) = figure(report).subfigs[0].axes
    assert axes.get_ylabel() == "<q> $"
    assert pictures(report)


def test_points_that_do_not_exist_are_left_out(sampled):
    curve = replace(with_points(sampled.curves[0], 10), y=(float("nan"),) + (1.0,) * 9)
    assert ElementTree.fromstring(pictures(replace(sampled, curves=(curve,)))[0].svg) is not None


def test_print_ink_reaches_axes_and_words(sampled):
    sheet = figure(sampled, PRINT_INK)
    axes = sheet.subfigs[0].axes[0]
    assert axes.yaxis.label.get_color() == PRINT_INK
    assert matplotlib.colors.to_hex(axes.spines["left"].get_edgecolor()) == PRINT_INK


def test_histories_of_one_label_share_a_panel_and_others_do_not():
    one = Curve("a", "a", "draw", (0.0, 1.0), (0.0, 1.0), style="history")
    kinds = panels((one, one, replace(one, label="b"), replace(one, style="gap")))
    assert [(panel.kind, len(panel.curves)) for panel in kinds] == [("history", 2), ("history", 1), ("gap", 1)]
    assert isinstance(kinds[0], Panel)
