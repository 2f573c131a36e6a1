"""Every curve in the report: section, figures, document and tables."""

import json
from dataclasses import replace
from importlib import resources

import jsonschema
import numpy as np
import pytest
from matplotlib.collections import FillBetweenPolyCollection

from regimes.checks import Check
from regimes.inference.health import Health
from regimes.report import figures, verdict_document
from regimes.report.every_captions import caption, shown
from regimes.report.every_curve import (
    agreement,
    agreement_fact,
    ballistic_sentence,
    dissent,
    duration,
    every_curve,
    spectrum_sentence,
    triplets_sentence,
)
from regimes.report.figures.kinds import predicted
from regimes.report.slopes import spectrum_slope
from regimes.report.tables import curve_table, write_curves_netcdf
from regimes.report.words import p_text
from tests.report_fixture import demo_analysis, singles_only

HOUR, DAY, KM = 3600.0, 86400.0, 1e3


@pytest.fixture(scope="module")
def analysis():
    return demo_analysis()


@pytest.fixture(scope="module")
def others(analysis):
    return analysis.others


def with_others(analysis, **changes):
    return replace(analysis, others=replace(analysis.others, **changes))


def with_spectrum(others, **changes):
    return replace(others, spectrum=replace(others.spectrum, **changes))


def bounded(others, kind):
    """A spectrum at 3, or at 1: nine draws in ten at the end, the others spread evenly over half a unit."""
    inner = np.linspace(0.0, 0.5, 402)[1:-1]
    inside = 3.0 - inner if kind == "lower_bound" else 1.0 + inner
    alpha = np.concatenate([np.full(3600, 3.0 if kind == "lower_bound" else 1.0), inside])
    return with_spectrum(others, kind=kind, reason="cannot be told", alpha=alpha)


def nothing(others):
    return with_spectrum(
        others, kind="none", reason="too short a range", alpha=np.empty(0), wavelengths=np.full(2, np.nan)
    )


# Words


def test_agreement_names_every_curve_on_its_side(others):
    said = agreement(others)
    assert said.startswith("7 of 8 other curves agree with the kernels fitted to the exit rates (lowest p = ")
    assert "): relative dispersion, " in said
    assert said.endswith("and structure function. One dissents: kurtosis. ")
    assert agreement_fact(others) == ("curves that agree", "7 of 8", "with the fitted kernels")


def test_agreement_of_all_of_none_and_of_nothing(others):
    good = tuple(replace(check, p_value=0.5) for check in others.checks)
    assert agreement(replace(others, checks=good)).startswith("All 8 other curves agree")
    bad = tuple(replace(check, p_value=0.005) for check in others.checks)
    assert agreement(replace(others, checks=bad[:2])) == (
        "None of 2 other curves agree with the kernels fitted to the exit rates (lowest p = 0.005). These dissent: "
        "relative dispersion and mean log separation. "
    )
    bare = replace(others, checks=(), checks_missing="too few times are left")
    assert agreement(bare) == "Curves in time are not held against the fitted kernels: too few times are left."
    assert agreement_fact(bare)[1] == "none checked"
    half = replace(others, checks=good[-1:], checks_missing="too few times are left")
    assert agreement(half) == (
        "The only other curve checked agrees with the kernels fitted to the exit rates (lowest p = 0.50): structure "
        "function. Curves in time are not held against the fitted kernels: too few times are left."
    )


def test_dissent_says_where_and_what_usually_causes_it(others):
    kurtosis = next(check for check in others.checks if check.curve == "kurtosis")
    assert kurtosis.where[[0, -1]] / DAY == pytest.approx([28 / 3, 50.0])
    assert dissent(kurtosis) == (
        "Kurtosis (p = 0.004, outside the 95 % band at 9.3 to 50 days): a few pairs caught in eddies or fronts are "
        "the usual cause."
    )
    single = Check("residence_time", "separation", [2e3], [1.0], np.full((5, 1), 2.0), 0.005, "s")
    assert ", outside the 95 % band at 2.0 km): " in dissent(single)
    assert dissent(replace(single, band=np.full((5, 1), 1.0))).startswith("Residence time (p = 0.005): ")


@pytest.mark.parametrize(
    ("value", "text"), [(0.395, "0.40"), (1.0, "1.00"), (0.025, "0.025"), (0.004, "0.004"), (1e-7, "under 0.0001")]
)
def test_p_values_are_never_nought(value, text):
    assert p_text(value) == text


def test_spectrum_in_a_sentence(others):
    assert spectrum_sentence(others) == (
        "Spectra fitted to the structure function have a slope α = 2.2 (1.8 to 2.6, 95 %) at wavelengths of 8.0 to "
        "120 km."
    )
    assert "a slope α ≥ 2.5 (95 %) at wavelengths of 8.0 to 120 km: cannot be told." in spectrum_sentence(
        bounded(others, "lower_bound")
    )
    assert "a slope α ≤ 1.5 (95 %)" in spectrum_sentence(bounded(others, "upper_bound"))
    said = "No spectral slope comes from the structure function: "
    assert spectrum_sentence(nothing(others)) == f"{said}too short a range."
    absent = replace(others, spectrum=None, spectrum_missing="relative velocities are not resolved")
    assert spectrum_sentence(absent) == f"{said}relative velocities are not resolved."


def test_spectrum_that_did_not_converge_says_so(others):
    fits = others.spectrum.candidates
    sick = with_spectrum(others, candidates=(fits[0], replace(fits[1], health=Health(1.004, 900.0, 31.0))))
    assert "its sampling did not converge: the chain is 31 autocorrelation times long" in spectrum_sentence(sick)
    assert spectrum_slope(sick).kind == "estimate"


@pytest.mark.parametrize(
    ("outside", "words"),
    [
        ([], "holds to the last time"),
        ([0], "does not hold at the first time"),
        ([5], "holds until"),
        (None, "One cluster says nothing"),
    ],
)
def test_ballistic_law_in_a_sentence(others, outside, words):
    """The departure is made to leave its band at a chosen time, or all pairs are put in one cluster."""
    found = others.ballistic
    curve = found.dispersion
    if outside is None:
        one = {name: getattr(curve, name).sum(axis=0, keepdims=True) for name in ("numerator", "denominator")}
        found = replace(found, dispersion=replace(curve, weight=np.ones(1), **one))
    else:
        away = np.zeros_like(found.departure.numerator)
        away[:, outside] = 100.0 * curve.numerator[:, outside]
        found = replace(found, departure=replace(found.departure, numerator=away))
    said = ballistic_sentence(found)
    assert words in said
    assert said.startswith("Pairs start 0.60 km apart; their first relative velocity is 0.037 m/s")  # 600 m: the world
    if outside == [5]:
        assert f"holds until {duration(curve.axis[4])} after the start" in said


def test_no_ballistic_law_and_velocities_below_the_errors(others):
    assert "too few steps follow their start" in ballistic_sentence(None)
    found = others.ballistic
    weak = replace(found, structure=replace(found.structure, numerator=-found.structure.numerator))
    assert ballistic_sentence(weak).endswith("How long they keep it cannot be told.")


def test_triplets_in_a_sentence(others):
    found = others.triplets
    side = found.side_square.value[[0, -1]] / KM**2
    said = triplets_sentence(found)
    assert said.startswith("12 triangles of particles released together: between 12 hours and 50 days the mean area")
    assert f"from {side[0]:.0f}" not in said  # two digits are printed
    assert f"{round(side[0], -1):.0f} to {round(side[1], -3):.0f} km²" in said
    assert "the case does not want them" in triplets_sentence(None)


@pytest.mark.parametrize(
    ("seconds", "text"),
    [
        (HOUR, "1.0 hour"),
        (7 * HOUR, "7.0 hours"),
        (47 * HOUR, "47 hours"),
        (2 * DAY, "2.0 days"),
        (40 * DAY, "40 days"),
    ],
)
def test_durations_in_hours_and_days(seconds, text):
    assert duration(seconds) == text


def test_section_holds_the_figures_in_the_order_of_the_text(analysis):
    drawn = {name: {"name": name} for name in figures.FIGURES}
    content = every_curve(analysis, drawn)
    assert [f["name"] for f in content["checks"]] == ["checks"]
    assert [f["name"] for f in content["velocities"]] == ["structure", "spectrum", "kinds"]
    assert [f["name"] for f in content["triangles"]] == ["triplets"]


# Figures


def panel(analysis, curve):
    names = [check.curve for check in analysis.others.checks]
    return figures.plot_checks(analysis)[names.index(curve)], analysis.others.checks[names.index(curve)]


@pytest.mark.parametrize(
    ("curve", "x_unit", "y_of"),
    [
        ("relative_dispersion", DAY, lambda v: v * 1e-6),
        ("mean_log_separation", DAY, lambda v: np.exp(v) / 1000.0),
        ("residence_time", KM, lambda v: v / DAY),
        ("separation_distribution", DAY, lambda v: v),
        ("triplet_area", DAY, lambda v: np.exp(v) * 1e-6),
    ],
)
def test_panels_show_data_and_bands_in_the_units_of_their_axes(analysis, curve, x_unit, y_of):
    ax, check = panel(analysis, curve)
    inside, _ = (line for line in ax.lines if line.get_marker() in ("o", "D"))
    assert np.allclose(inside.get_xdata() * x_unit, check.axis, rtol=1e-12)  # round-off
    assert np.allclose(inside.get_ydata(), y_of(check.value), rtol=1e-12)  # round-off
    shades = [c for c in ax.collections if isinstance(c, FillBetweenPolyCollection)]
    for shade, (low, high) in zip(shades, ((0, 4), (1, 3)), strict=True):
        heights = shade.get_paths()[0].vertices[:, 1]
        assert np.isclose(heights.max(), y_of(check.band[high]).max(), rtol=1e-12)  # round-off
        assert np.isclose(heights.min(), y_of(check.band[low]).min(), rtol=1e-12)  # round-off


def test_dissent_stands_out_without_colour(analysis):
    ax, check = panel(analysis, "kurtosis")
    title = ax.get_title(loc="left")
    assert title == "kurtosis\ndissents, p = 0.004"
    weights = {a.title.get_text() or a._left_title.get_text(): a._left_title.get_weight() for a in ax.figure.axes}
    assert [t for t, weight in weights.items() if weight == "bold"] == [title]
    inside, outside = (line for line in ax.lines if line.get_marker() in ("o", "D"))
    assert np.allclose(outside.get_xdata() * DAY, check.where, rtol=1e-12)  # round-off
    assert outside.get_marker() == "D"
    assert inside.get_xdata().size + outside.get_xdata().size == check.axis.size


def test_panel_of_values_below_zero_is_linear(analysis):
    growth = next(c for c in analysis.others.checks if c.curve == "relative_diffusivity")
    sunk = replace(growth, value=growth.value - 1.5 * growth.value[0])
    (ax,) = figures.plot_checks(with_others(analysis, checks=(sunk,)))
    assert ax.get_yscale() == "linear"
    assert ax.get_ylim()[0] < sunk.value[0] < 0.0


def bars_of(ax, label):
    return next(c for c in ax.containers if c.get_label() == label)


def test_structure_function_fills_the_bins_that_were_used(analysis):
    ax = figures.plot_structure(analysis)
    total = analysis.others.structure.total()
    used = analysis.others.spectrum.likelihood.separation
    inside = (total.axis > 0.99 * used[0]) & (total.axis < 1.01 * used[-1])
    filled, hollow = (bars_of(ax, label)[0] for label in ("total, 95 %", "total, not used"))
    assert np.allclose(filled.get_xdata() * KM, used, rtol=1e-12)  # round-off
    assert np.allclose(filled.get_ydata(), total.value[inside], rtol=1e-12)  # round-off
    assert filled.get_xdata().size + hollow.get_xdata().size == total.axis.size
    parts = [bars_of(ax, name)[0].get_ydata() for name in ("longitudinal", "transverse")]
    assert np.allclose(sum(parts), total.value, rtol=1e-9)  # round-off of the components
    assert not [line for line in ax.lines if line.get_label() == "position errors"]  # none were stated


def test_noise_floor_is_ten_squares_of_the_error_over_the_step(analysis):
    noisy = replace(analysis.others.structure, position_error=50.0)
    ax = figures.plot_structure(with_others(analysis, structure=noisy))
    line = next(line for line in ax.lines if line.get_label() == "position errors")
    assert line.get_ydata()[0] == pytest.approx(10.0 * (50.0 / noisy.step) ** 2, rel=1e-12)  # round-off


def test_structure_function_without_a_spectrum(analysis):
    bare = with_others(analysis, spectrum=None, spectrum_missing="not resolved", velocity_ratio=0.5)
    ax = figures.plot_structure(bare)
    checked = next(c for c in bare.others.checks if c.curve == "structure_function")
    assert np.allclose(bars_of(ax, "total, 95 %")[0].get_xdata() * KM, checked.axis, rtol=1e-12)  # round-off
    assert not [c for c in ax.collections if isinstance(c, FillBetweenPolyCollection)]
    assert "No spectrum was fitted" in caption("structure", bare)
    assert "does not resolve these velocities" in caption("structure", bare)
    assert "does not resolve" not in caption("structure", analysis)
    nowhere = with_others(bare, checks=())
    assert {c.get_label() for c in figures.plot_structure(nowhere).containers} == {
        "longitudinal", "transverse", "total, not used"
    }  # fmt: skip


def test_posterior_of_the_spectrum_has_unit_area_on_the_axis_of_the_kernel(analysis):
    top, bottom = figures.plot_spectrum(analysis)
    density, edges, _ = next(p for p in top.patches if not p.get_fill()).get_data()
    assert np.sum(density * np.diff(edges)) == pytest.approx(1.0, rel=1e-9)  # round-off
    assert top.get_xlim() == bottom.get_xlim()
    mark = next(line for line in top.lines if line.get_marker() == "^")
    assert mark.get_xdata()[0] == analysis.others.spectrum.slope_plus_one
    words = [text.get_text() for text in top.get_legend().get_texts()]
    assert words == [
        "structure function, wavelengths 8.0 to 120 km:\nα = 2.2 (1.8 to 2.6, 95 %)",
        "slope of the structure function + 1 = 2.6,\nfor comparison only",
    ]
    assert len(bottom.get_yticks()) == sum(s.curve == "exit_rate" for s in analysis.verdict.slopes)


def test_mark_beyond_the_axes_stays_inside(analysis):
    top, _ = figures.plot_spectrum(replace(analysis, others=with_spectrum(analysis.others, slope_plus_one=4.2)))
    low, high = top.get_xlim()
    assert low < next(line for line in top.lines if line.get_marker() == "^").get_xdata()[0] < high
    assert "+ 1 = 4.2" in top.get_legend().get_texts()[1].get_text()


def test_predicted_diffusivity_of_a_cubic_law(others):
    """D^2 = c t^3 has K = 3/2 c t^2 = 3/2 c^(1/3) D^(4/3) (Richardson 1926, Obukhov 1941, from memory)."""
    times = np.geomspace(1.0, 30.0, 7) * DAY
    middle, c = 0.5 * (times[1:] + times[:-1]), 3e-9
    square = Check("relative_dispersion", "time", times, times, np.ones((5, 1)) * c * times**3, 0.5, "m2")
    growth = Check("relative_diffusivity", "time", middle, middle, np.ones((5, 1)) * 1.5 * c * middle**2, 0.5, "m2/s")
    distance, value = predicted(replace(others, checks=(square, growth)))
    assert np.allclose(value, 1.5 * c ** (1 / 3) * distance ** (4 / 3), rtol=1e-10)  # round-off: a line in logarithms
    assert predicted(replace(others, checks=(square,)))[0].size == 0


def test_diffusivities_are_drawn_at_the_root_of_the_dispersion(analysis):
    ax = figures.plot_kinds(analysis)
    found = analysis.others.diffusivity
    positive = found.from_velocity.value > 0
    x, y = bars_of(ax, "from velocities, 95 %")[0].get_data()
    assert np.allclose(x * KM, np.sqrt(found.square.value[positive]), rtol=1e-12)  # round-off
    assert np.allclose(y, found.from_velocity.value[positive], rtol=1e-12)  # round-off
    x, _ = bars_of(ax, "from growth, 95 %")[0].get_data()
    assert np.all((x * KM > found.separation[0]) & (x * KM < found.separation[-1]))


def test_triplets_are_drawn_in_square_kilometres(analysis):
    top, bottom = figures.plot_triplets(analysis)
    found = analysis.others.triplets
    for label, curve in (("mean area, 95 %", found.area), ("mean square side, 95 %", found.side_square)):
        x, y = bars_of(top, label)[0].get_data()
        assert np.allclose(x * DAY, curve.axis, rtol=1e-12)  # round-off
        assert np.allclose(y * 1e6, curve.value, rtol=1e-12)  # round-off
    assert np.array_equal(bars_of(bottom, "aspect, 95 %")[0].get_ydata(), found.aspect.value)


def test_figures_that_do_not_apply_are_not_drawn(analysis, others):
    assert figures.names_of(analysis) == tuple(figures.FIGURES)
    for name, change in (
        ("checks", {"checks": ()}),
        ("spectrum", {"spectrum": None}),
        ("spectrum", {"spectrum": nothing(others).spectrum}),
        ("kinds", {"diffusivity": None}),
        ("triplets", {"triplets": None}),
    ):
        names = figures.names_of(with_others(analysis, **change))
        assert set(figures.FIGURES) - set(names) == {name}


@pytest.mark.parametrize("name", figures.OF_EVERY_CURVE)
def test_captions_of_other_outcomes_are_whole_sentences(analysis, others, name):
    found = replace(analysis, others=bounded(others, "lower_bound"))
    for words in (caption(name, found), shown(name, found)):
        assert words.endswith(".")
        assert "  " not in words


# Document


@pytest.fixture(scope="module")
def schema():
    text = resources.files("regimes.report").joinpath("verdict.schema.json").read_text(encoding="utf-8")
    return jsonschema.Draft202012Validator(json.loads(text))


def document(schema, analysis):
    found = verdict_document(analysis)
    schema.validate(found)
    return found


def test_document_of_checks(analysis, schema):
    found = document(schema, analysis)
    assert [c["curve"] for c in found["checks"]] == [c.curve for c in analysis.others.checks]
    kurtosis = next(c for c in found["checks"] if c["curve"] == "kurtosis")
    assert (kurtosis["p_value"], kurtosis["agrees"], kurtosis["unit"]) == (0.004, False, "d")
    assert kurtosis["where"] == pytest.approx([28 / 3, 49 / 3, 28.583333, 50.0], rel=1e-5)  # six printed digits
    assert {c["curve"] for c in found["checks"] if c["unit"] == "km"} == {"residence_time", "structure_function"}
    assert found["checks_reason"] == ""


def test_document_of_an_estimate(analysis, schema):
    found = document(schema, analysis)["spectrum"]
    assert found["kind"] == "estimate"
    assert found["wavelength_km"] == [8.0, 120.0]
    # normal draws of mean 2.2 and standard deviation 0.2: five standard errors of a median of 4000
    assert found["median"] == pytest.approx(2.2, abs=5 * 1.25 * 0.2 / np.sqrt(4000))
    assert found["lo95"] < found["lo68"] < found["median"] < found["hi68"] < found["hi95"]
    assert found["reason"] == ""


@pytest.mark.parametrize(
    ("kind", "kept"), [("lower_bound", {"lo68": 2.66, "lo95": 2.525}), ("upper_bound", {"hi68": 1.34, "hi95": 1.475})]
)
def test_document_of_a_bound_keeps_its_one_sided_ends(analysis, schema, kind, kept):
    """Of the draws between the ends alone, which are even over half a unit: the 5 and 32 % points from inside."""
    found = document(schema, replace(analysis, others=bounded(analysis.others, kind)))["spectrum"]
    numbers = {k: v for k, v in found.items() if k in ("median", "lo68", "hi68", "lo95", "hi95") and v is not None}
    assert numbers == pytest.approx(kept, abs=0.003)  # two steps of the evenly spaced draws
    assert found["kind"] == kind
    assert found["reason"] == "cannot be told"


def test_document_without_a_spectrum(analysis, schema):
    absent = with_others(analysis, spectrum=None, spectrum_missing="not resolved", checks=(), checks_missing="short")
    found = document(schema, absent)
    levels = dict.fromkeys(("median", "lo68", "hi68", "lo95", "hi95"))
    assert found["spectrum"] == {"kind": "none", **levels, "wavelength_km": None, "reason": "not resolved"}
    assert (found["checks"], found["checks_reason"]) == ([], "short")
    none = document(schema, replace(analysis, others=nothing(analysis.others)))
    assert none["spectrum"]["reason"] == "too short a range"


def test_document_without_a_pair_gives_the_reason(schema):
    found = singles_only()
    said = document(schema, found)
    assert said["checks"] == []
    assert said["spectrum"]["kind"] == "none"
    assert said["spectrum"]["reason"] == said["checks_reason"] == found.reasons[0]


@pytest.mark.parametrize(
    ("path", "value"),
    [
        (("checks", 0, "unit"), "h"),
        (("checks", 0, "p_value"), 1.2),
        (("checks", 2, "where"), [0.0]),
        (("spectrum", "kind"), "none"),  # with numbers
        (("spectrum", "kind"), "lower_bound"),  # with a median
        (("spectrum", "wavelength_km"), None),
        (("spectrum", "median"), 3.4),
    ],
)
def test_schema_refuses(analysis, schema, path, value):
    found = json.loads(json.dumps(verdict_document(analysis)))
    inner = found
    for key in path[:-1]:
        inner = inner[key]
    inner[path[-1]] = value
    assert not schema.is_valid(found)


# Tables


def test_table_holds_every_curve(analysis):
    table = curve_table(analysis)
    rows = dict(iter(table.groupby("curve")))
    parts = rows["structure_longitudinal"].value.to_numpy() + rows["structure_transverse"].value.to_numpy()
    assert np.allclose(parts, rows["structure_total"].value, rtol=1e-9, equal_nan=True)  # round-off of the components
    moments = analysis.dispersion
    direct = moments.fourth.sum(axis=0) * moments.count.sum(axis=0) / moments.square.sum(axis=0) ** 2
    assert np.allclose(rows["kurtosis"].value, direct, rtol=1e-12)  # round-off; no pair connects clusters here
    growth = analysis.others.diffusivity.from_growth
    assert np.array_equal(rows["relative_diffusivity_growth"].axis_value, growth.axis)
    assert set(rows["triplet_area"].n_pair) == {12}
    assert set(rows["structure_total"].unit) == {"m2/s2"}


def test_checks_in_the_table_are_data_and_prediction(analysis):
    table = curve_table(analysis)
    for check in analysis.others.checks:
        data, prediction = (table[table.curve == f"{kind}_{check.curve}"] for kind in ("checked", "predicted"))
        assert np.array_equal(data.value, check.value)
        assert data.standard_error.isna().all()
        assert np.array_equal(prediction[["lo95", "value", "hi95"]].to_numpy().T, check.band[[0, 2, 4]])
        outside = (data.value.to_numpy() < prediction.lo95.to_numpy()) | (
            data.value.to_numpy() > prediction.hi95.to_numpy()
        )
        assert np.array_equal(data.axis_value[outside], check.where)


def test_tables_leave_out_what_there_is_not(analysis, tmp_path):
    bare = with_others(analysis, checks=(), diffusivity=None, triplets=None)
    names = set(curve_table(bare).curve)
    gone = set(curve_table(analysis).curve) - names
    assert all(name.startswith(("checked_", "predicted_", "relative_diffusivity_", "triplet_")) for name in gone)
    assert len(gone) == 2 * 8 + 2 + 3
    write_curves_netcdf(bare, tmp_path / "c.nc")
