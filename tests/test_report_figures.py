"""The figures show the numbers of the analysis, in the units on their axes."""

import subprocess
import sys
from dataclasses import replace

import matplotlib
import numpy as np
import pytest
from matplotlib.collections import FillBetweenPolyCollection
from matplotlib.figure import Figure

from regimes.particles import single_particle
from regimes.report import figures
from regimes.report.captions import caption, description
from regimes.report.figures.style import COLOUR, INK, SKY, log_axis, prefixed, svg
from regimes.report.single import number_rows
from regimes.synthetic.particles import Motion, drifting_particles
from regimes.verdict.record import Interval, Slope, Supported
from tests.report_fixture import demo_analysis, with_verdict

SECONDS_A_DAY = 24 * 60 * 60


@pytest.fixture(scope="module")
def analysis():
    return demo_analysis()


PANELS = ("checks", "spectrum", "triplets")


@pytest.mark.parametrize("name", [name for name in figures.FIGURES if name not in PANELS])
def test_every_figure_draws_on_given_axes_and_on_its_own(analysis, name):
    ax = Figure().add_subplot()
    assert figures.FIGURES[name](analysis, ax) is ax
    own = figures.FIGURES[name](analysis)
    assert own is not ax
    assert own.get_xlabel()


@pytest.mark.parametrize("name", PANELS)
def test_figures_of_panels_draw_in_a_given_figure_and_on_their_own(analysis, name):
    given = Figure().subfigures(1, 2)[1]
    axes = figures.FIGURES[name](analysis, given)
    assert all(ax.figure is given for ax in axes)
    own = figures.FIGURES[name](analysis)
    assert len(own) == len(axes) >= 2
    assert all(ax.get_xlabel() or ax.get_ylabel() for ax in own)
    assert own[-1].get_xlabel()


@pytest.mark.parametrize("name", figures.FIGURES)
def test_captions_and_descriptions_are_whole_sentences(analysis, name):
    for words in (caption(name, analysis), description(name, analysis)):
        assert words.endswith(".")
        assert len(words) > 60
        assert "  " not in words
        assert "nan" not in words.lower().split()


def test_no_window_system_and_no_global_setting_is_touched(analysis):
    before = dict(matplotlib.rcParams)
    for name in figures.FIGURES:
        figures.draw(name, analysis)
    assert dict(matplotlib.rcParams) == before
    code = "import sys, regimes.report; sys.exit('matplotlib.pyplot' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0


def test_correlation_and_its_integral_are_those_of_the_record(analysis):
    ax = figures.plot_correlation(analysis)
    found = analysis.single.correlation
    right = next(other for other in ax.figure.axes if other is not ax)
    drawn = next(line for line in ax.lines if line.get_label() == "both")
    assert np.allclose(drawn.get_xdata() * SECONDS_A_DAY, found.lag, rtol=1e-12)  # round-off
    assert np.array_equal(drawn.get_ydata(), found.both)
    assert np.allclose(right.lines[0].get_ydata() * SECONDS_A_DAY, found.integral, rtol=1e-12)  # round-off
    zeros = [axes.transData.transform((0.0, 0.0))[1] for axes in (ax, right)]
    assert zeros[0] == pytest.approx(zeros[1], abs=1e-6)  # one zero for both axes: round-off
    for axes, low in ((ax, min(found.low.min(), found.north.min())), (right, found.integral_low.min() / SECONDS_A_DAY)):
        assert axes.get_ylim()[0] <= low


def test_absolute_dispersion_lies_between_taylors_limits(analysis):
    # Taylor 1921: 2 u'^2 t^2 early and 4 kappa t late, for both components together
    ax = figures.plot_absolute(analysis)
    single = analysis.single
    early, late = (next(line for line in ax.lines if line.get_label() == f"{w} limit") for w in ("early", "late"))
    t, y = early.get_data()
    assert np.allclose(y * 1e6, 2 * single.velocity.value**2 * (t * SECONDS_A_DAY) ** 2, rtol=1e-12)  # round-off
    t, y = late.get_data()
    assert np.allclose(y * 1e6, 4 * single.diffusivity.mean.value * t * SECONDS_A_DAY, rtol=1e-12)  # round-off
    line = _errorbar(ax, "total, 95 %")[0]
    curve = single.dispersion.total
    # records of 60 days, of which a third is shown where their own mean was removed
    assert line.get_xdata().max() == pytest.approx(20.0, rel=0.1)
    shown = curve.axis <= line.get_xdata().max() * SECONDS_A_DAY * (1 + 1e-9)
    assert np.allclose(line.get_ydata() * 1e6, curve.value[shown], rtol=1e-12)  # round-off
    whole = replace(analysis, single=replace(single, mean="none"))
    assert _errorbar(figures.plot_absolute(whole), "total, 95 %")[0].get_xdata().max() == pytest.approx(60.0)


def test_single_figures_of_one_particle_have_no_bars(analysis):
    tracks, _ = drifting_particles(Motion(0.04, 1.0 / (2 * SECONDS_A_DAY)), (1, 1), 21600.0, 241, 4)
    alone = replace(analysis, single=single_particle(tracks))
    (bars,) = _errorbar(figures.plot_absolute(alone), "total, 95 %")[2]
    assert all(np.ptp(segment[:, 1]) == 0 for segment in bars.get_segments())
    assert np.isfinite(figures.plot_correlation(alone).get_ylim()).all()
    assert "fewer than two" in str(number_rows(alone.single))


def _errorbar(ax, label):
    return next(c for c in ax.containers if c.get_label() == label)


def test_exponents_are_drawn_per_day_over_km_filled_where_resolved(analysis):
    ax = figures.plot_exponent(analysis)
    rates = analysis.rates
    for label, used, face in (("data, 95 %", rates.resolved, INK), ("not resolved", ~rates.resolved, "white")):
        line, _, (bars,) = _errorbar(ax, label)
        x, y = line.get_data()
        assert np.allclose(x, rates.thresholds[:-1][used] / 1000.0, rtol=1e-12)  # round-off
        assert np.allclose(y, rates.rate[used] * SECONDS_A_DAY, rtol=1e-12)  # round-off
        assert line.get_markerfacecolor() == face
        ends = np.array(bars.get_segments())[:, :, 1]
        assert np.allclose(ends[:, 1], rates.high95[used] * SECONDS_A_DAY, rtol=1e-12)  # round-off
        assert np.allclose(ends[:, 0], rates.low95[used] * SECONDS_A_DAY, rtol=1e-12)  # round-off


def test_guide_lines_have_the_published_slopes(analysis):
    # exponents 0, -2/3, -1, -2: Artale et al. (1997) Phys. Fluids 9, 3162, and Boffetta et al. (2000) Chaos 10, 50
    published = {"exponential": 0.0, "richardson": -2 / 3, "ballistic": -1.0, "diffusive": -2.0}
    ax = figures.plot_exponent(analysis)
    for name, slope in published.items():
        line = next(li for li in ax.lines if li.get_color() == COLOUR[name] and len(li.get_xdata()) == 2)
        (x0, x1), (y0, y1) = np.log(line.get_xdata()), np.log(line.get_ydata())
        assert (y1 - y0) / (x1 - x0) == pytest.approx(slope, abs=1e-12)  # round-off


def test_late_laws_of_dispersion_have_the_published_slopes(analysis):
    # Richardson t^3 (1926), ballistic kernel t^2 (Bennett 1984, flat spectrum), diffusive t (Taylor 1921)
    ax = figures.plot_dispersion(analysis)
    for name, slope in {"richardson": 3.0, "ballistic": 2.0, "diffusive": 1.0}.items():
        line = next(li for li in ax.lines if li.get_color() == COLOUR[name] and len(li.get_xdata()) == 2)
        (x0, x1), (y0, y1) = np.log(line.get_xdata()), np.log(line.get_ydata())
        assert (y1 - y0) / (x1 - x0) == pytest.approx(slope, abs=1e-12)  # round-off


def test_times_with_few_pairs_are_left_out(analysis):
    counted = analysis.dispersion
    few = counted.count.copy()
    few[4:, -1] = 0  # four pairs are left at the last time
    names = ("square", "east_square", "north_square", "east_north", "fourth", "log", "log_count")
    sums = {name: np.where(few > 0, getattr(counted, name), 0.0) for name in names}
    thin = replace(analysis, dispersion=replace(counted, count=few, **sums))
    drawn = [_errorbar(figures.plot_dispersion(a), "total, 95 %")[0].get_xdata() for a in (analysis, thin)]
    assert drawn[0].size == counted.times.size
    assert np.array_equal(drawn[1], drawn[0][:-1])


def test_pairs_of_one_cluster_are_drawn_without_bars(analysis):
    counted = analysis.dispersion
    names = ("count", "square", "east_square", "north_square", "east_north", "fourth", "log", "log_count")
    joined = {name: getattr(counted, name).sum(axis=0, keepdims=True) for name in names}
    one = replace(analysis, dispersion=replace(counted, weight=np.ones(1), **joined))
    line, _, (bars,) = _errorbar(figures.plot_dispersion(one), "total, 95 %")
    assert line.get_xdata().size == counted.times.size
    assert all(np.ptp(segment[:, 1]) == 0 for segment in bars.get_segments())


def test_probabilities_and_supported_stretches(analysis):
    held = Supported("richardson", 11e3, 60e3)
    ax = figures.plot_regimes(with_verdict(analysis, supported=(held,)))
    by = analysis.verdict.by_separation
    for name, p in by.probability.items():
        steps = [s for s in ax.patches if np.allclose(s.get_edgecolor(), matplotlib.colors.to_rgba(COLOUR[name]))]
        values, edges, _ = steps[0].get_data()
        assert np.array_equal(values, p)
        assert np.allclose(edges, by.edges / 1000.0, rtol=1e-12)  # round-off
    (bar,) = [c for c in ax.collections if isinstance(c, FillBetweenPolyCollection)]
    assert np.allclose(np.unique(bar.get_paths()[0].vertices[:, 0]), [11.0, 60.0], rtol=1e-12)  # round-off


def test_regimes_differ_by_more_than_colour():
    from regimes.report.figures.style import HATCH, LINE

    for table in (COLOUR, LINE, HATCH):
        assert len({str(look) for look in table.values()}) == 4


def test_diffusive_slopes_stand_in_the_strip_below_every_slope(analysis):
    ax = figures.plot_slope(analysis)
    by = analysis.verdict.by_separation
    steps = [s for s in ax.patches if hasattr(s, "get_data")]
    median = steps[-1].get_data()[0]
    diffusive = by.slope_median < 1
    assert diffusive.any()
    lowest = ax.get_ylim()[0]
    assert np.all((median[diffusive] > lowest) & (median[diffusive] < 0.6))
    assert np.array_equal(median[~diffusive], by.slope_median[~diffusive])


def test_area_under_a_transition_is_its_probability(analysis):
    ax = figures.plot_transitions(analysis)
    shown = [t for t in analysis.fits["exit_rate"].transitions() if t.probability > 0.05]
    outlines = [s for s in ax.patches if not s.get_fill()]
    assert len(outlines) == len(shown) >= 2
    for transition, outline in zip(shown, outlines, strict=True):
        y, edges, _ = outline.get_data()
        inside = np.mean((transition.draws > edges[0] * 1e3) & (transition.draws < edges[-1] * 1e3))
        area = np.sum(y * np.diff(np.log(edges)))
        assert area == pytest.approx(transition.probability * inside, rel=1e-6)  # edges rounded in km and m


def test_many_transitions_do_not_break_the_figure(analysis):
    few = replace(analysis, fits={})
    assert not [s for s in figures.plot_transitions(few).patches if hasattr(s, "get_data")]
    assert any("no transition is more probable" in t.get_text() for t in figures.plot_transitions(few).texts)


def test_slopes_are_points_arrows_or_words(analysis):
    nan = float("nan")
    slopes = (
        Slope(1e3, 5e3, "exit_rate", Interval(1.7, 1.6, 1.8, 1.5, 1.9), "estimate", ""),
        Slope(1e3, 5e3, "separation", Interval(nan, 2.6, nan, 2.4, nan), "lower_bound", "steep"),
        Slope(1e3, 5e3, "exit_rate", Interval(nan, nan, 1.2, nan, 1.4), "upper_bound", "flat"),
        Slope(1e3, 5e3, "exit_rate", Interval(nan, nan, nan, nan, nan), "none", "the range is diffusive"),
        Slope(1e3, 5e3, "joint", Interval(2.2, 2.1, 2.3, 2.0, 2.4), "estimate", ""),
    )
    ax = figures.plot_slopes(with_verdict(analysis, slopes=slopes))
    words = [t.get_text() for t in ax.texts]
    assert {"α ≥ 2.4 (95 %)", "α ≤ 1.4 (95 %)", "the range is diffusive"} <= set(words)
    spans = [tuple(np.round(li.get_xdata(), 9)) for li in ax.lines if len(li.get_xdata()) == 2]
    assert (1.5, 1.9) in spans
    assert (1.6, 1.8) in spans
    assert (2.0, 2.4) in spans
    marks = [line.get_marker() for line in ax.lines if line.get_marker() not in ("None", "|")]
    assert marks == ["o", "D"]


@pytest.mark.parametrize(("low", "high"), [(1.0, 3.0), (0.5, 40.0), (1e-3, 1e3), (1e-9, 1e9)])
def test_log_axes_have_at_least_two_plain_labels(low, high):
    ax = Figure().add_subplot()
    ax.set_xscale("log")
    ax.set_xlim(low, high)
    log_axis(ax.xaxis)
    shown = [t for t in ax.xaxis.get_majorticklocs() if low <= t <= high]
    assert len(shown) >= 2
    labels = [ax.xaxis.get_major_formatter()(t, 0) for t in shown]
    assert len(set(labels)) == len(labels)


def test_identifiers_carry_the_name_of_their_figure(analysis):
    text = svg(figures.draw("slope", analysis), "slope")
    assert 'id="slope-' in text
    assert prefixed('<a id="x"/><use xlink:href="#x" clip-path="url(#x)"/>', "f") == (
        '<a id="f-x"/><use xlink:href="#f-x" clip-path="url(#f-x)"/>'
    )


def test_drawings_hold_no_date(analysis):
    figure = figures.draw("slopes", analysis)
    assert "dc:date" not in svg(figure, "slopes")
    assert b"CreationDate" not in figures.pdf(figure, "slopes")


def test_colours_are_those_published():
    # Okabe & Ito (2008), Color universal design, figure of the palette: (0, 114, 178), (213, 94, 0), (0, 158, 115),
    # (204, 121, 167) and (86, 180, 233)
    published = [(0, 114, 178), (213, 94, 0), (0, 158, 115), (204, 121, 167), (86, 180, 233)]
    ours = [COLOUR[n] for n in ("exponential", "richardson", "ballistic", "diffusive")] + [SKY]
    assert [tuple(int(c[i : i + 2], 16) for i in (1, 3, 5)) for c in ours] == published
