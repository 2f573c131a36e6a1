"""Digits, curve tables, the LaTeX table and the posterior file."""

import re
import warnings
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from regimes.report import digits
from regimes.report.frames import COLUMNS
from regimes.report.posterior import write_posterior
from regimes.report.slopes import end_text, slope_text
from regimes.report.tables import curve_table, write_curves_csv, write_curves_netcdf
from regimes.report.tex import tex_table
from regimes.verdict.record import Interval, OuterScale, Slope
from tests.report_fixture import demo_analysis, singles_only, with_verdict


@pytest.fixture(scope="module")
def analysis():
    return demo_analysis()


# Digits


@pytest.mark.parametrize(
    ("value", "text"), [(0.0123, "0.012"), (150.0, "150"), (0.0, "0"), (99.6, "100"), (-2.55, "-2.5"), (1234, "1200")]
)
def test_significant(value, text):
    assert digits.significant(value) == text


@pytest.mark.parametrize(
    ("value", "text"),
    [(0.5, "0.50"), (0.996, "> 0.99"), (0.004, "< 0.01"), (1.0, "> 0.99"), (float("nan"), "not determined")],
)
def test_probability_is_never_nought_or_one(value, text):
    assert digits.probability(value) == text


def test_count_is_grouped_from_five_digits_on():
    assert digits.count(1234) == "1234"
    assert digits.count(1234567) == "1\u202f234\u202f567"


def test_slope_words():
    def slope(kind, **numbers):
        value = Interval(*(numbers.get(k, float("nan")) for k in ("median", "lo68", "hi68", "lo95", "hi95")))
        return Slope(1e3, 1e4, "exit_rate", value, kind, "")

    assert slope_text(slope("estimate", median=1.71, lo95=1.39, hi95=2.14)) == "1.7 (1.4 to 2.1)"
    assert slope_text(slope("lower_bound", lo95=2.41)) == "\u2265 2.4"
    assert slope_text(slope("upper_bound", hi95=1.52)) == "\u2264 1.5"
    assert slope_text(slope("none")) == "none quoted"


@pytest.mark.parametrize(
    ("scale", "words"),
    [
        ((8.1e4, 5e4, 1.3e5), "the spectrum may end near 81 km (50 to 130, 95 %)"),
        ((np.nan, 5e4, np.nan), "if the spectrum ends, then beyond 50 km (95 %)"),
        ((np.nan, np.nan, 1.3e5), "if the spectrum ends, then below 130 km (95 %)"),
        ((np.nan, np.nan, np.nan), ""),
    ],
)
def test_words_of_the_outer_scale(scale, words):
    value = Interval(*[float("nan")] * 5)
    assert end_text(Slope(1e3, 1e4, "exit_rate", value, "none", "", OuterScale(*scale), 0.5)) == words


# Curves


def test_table_is_tidy_and_complete(analysis):
    table = curve_table(analysis)
    assert tuple(table.columns) == COLUMNS
    assert not table.duplicated(["curve", "axis_value"]).any()
    assert set(table.axis_unit) == {"m", "s"}
    assert (table.n_cluster <= table.n_pair).all()
    sizes = table.groupby("curve").size()
    assert sizes["exponent"] == analysis.rates.rate.size
    assert sizes["dispersion"] == analysis.dispersion.times.size


def test_dispersion_in_the_table_is_the_mean_over_pairs(analysis):
    table = curve_table(analysis)
    rows = table[table.curve == "dispersion"]
    direct = analysis.dispersion.square.sum(axis=0) / analysis.dispersion.count.sum(axis=0)
    assert np.allclose(rows.value, direct, rtol=1e-12)  # round-off
    parts = [table[table.curve == f"dispersion_{name}"].value.to_numpy() for name in ("east", "north")]
    assert np.allclose(sum(parts), direct, rtol=1e-9)  # round-off of the components
    assert np.allclose(rows.hi95 - rows.value, 1.96 * rows.standard_error, rtol=1e-9)  # round-off


@pytest.fixture(scope="module")
def netcdf(analysis, tmp_path_factory):
    path = tmp_path_factory.mktemp("c") / "c.nc"
    write_curves_netcdf(analysis, path)
    return path


def test_csv_and_netcdf_say_the_same(analysis, netcdf, tmp_path):
    write_curves_csv(analysis, tmp_path / "c.csv")
    table = pd.read_csv(tmp_path / "c.csv")
    with xr.open_dataset(netcdf, engine="h5netcdf") as data:
        for key, rows in table.groupby("curve"):
            for column, name in (("value", key), ("lo95", f"{key}_lo95"), ("standard_error", f"{key}_standard_error")):
                # eight significant digits are printed
                assert np.allclose(data[name].values, rows[column], rtol=5e-8, equal_nan=True), name
            if not key.startswith(("checked_", "predicted_")):
                assert np.array_equal(data[f"{key}_n_cluster"].values, rows.n_cluster)


def test_single_particles_stand_below_the_pairs(analysis, tmp_path):
    write_curves_csv(analysis, tmp_path / "c.csv")
    table = pd.read_csv(tmp_path / "c.csv")
    single = analysis.single
    rows = table[table.curve == "absolute_dispersion"]
    parts = [table[table.curve == f"absolute_dispersion_{name}"].value.to_numpy() for name in ("east", "north")]
    assert np.allclose(sum(parts), rows.value, rtol=1e-7)  # eight printed digits
    assert np.allclose(rows.hi95 - rows.value, 1.96 * rows.standard_error, rtol=1e-6)  # eight printed digits
    memory = table[table.curve == "velocity_autocorrelation"]
    assert memory.value.iloc[0] == 1.0  # exact
    assert memory.axis_value.iloc[-1] == pytest.approx(single.window)
    integral = table[table.curve == "running_integral"].value.to_numpy()
    step = memory.axis_value.iloc[1]
    # trapezia, by hand; eight printed digits
    assert integral[2] == pytest.approx(step * (0.5 + memory.value.iloc[1] + 0.5 * memory.value.iloc[2]), rel=1e-6)
    assert set(rows.n_pair) == {0}
    assert set(memory.n_cluster) == {single.n_unit}


@pytest.mark.parametrize("single", [True, False])
def test_curves_without_a_pair(single, tmp_path):
    write_curves_csv(singles_only(single), tmp_path / "c.csv")
    table = pd.read_csv(tmp_path / "c.csv")
    assert tuple(table.columns) == COLUMNS
    assert len(set(table.curve)) == (9 if single else 0)


def test_netcdf_names_every_unit_and_long_name(analysis, netcdf):
    with xr.open_dataset(netcdf, engine="h5netcdf", decode_times=False) as data:
        for name, variable in data.variables.items():
            assert variable.attrs["units"] in {"1", "m", "s", "m2", "s-1", "m2 s-1", "m2 s-2", "percent"}, name
            assert variable.attrs["long_name"], name
        assert data.attrs["Conventions"].startswith("CF-")
        assert data["exponent"].attrs["units"] == "s-1"
        assert data["dispersion"].attrs["units"] == "m2"
        assert np.array_equal(data["exponent_resolved"].values == 1, analysis.rates.resolved)


def test_netcdf_holds_all_percentiles_of_a_prediction(analysis, netcdf):
    with xr.open_dataset(netcdf, engine="h5netcdf", decode_times=False) as data:
        for check in analysis.others.checks:
            stored = data[f"band_{check.curve}"]
            assert stored.dims == ("percentile", f"check_{check.curve}_{check.axis_name}")
            assert np.array_equal(stored.values, check.band)
        assert data["structure_total"].attrs["units"] == "m2 s-2"
        assert data["structure_total_n_pair"].attrs["long_name"].startswith("number of samples of pairs")


# LaTeX


def test_tex_table_is_a_plain_tabular_of_three_columns(analysis):
    text = tex_table(analysis)
    assert text.startswith("% invented bank\n\\begin{tabular}{lll}")
    assert text.endswith("\\end{tabular}\n")
    rows = [line for line in text.splitlines() if line.endswith(r"\\")]
    assert len(rows) > 5
    assert all(len(re.findall(r"(?<!\\)&", row)) == 2 for row in rows)
    assert text.isascii()
    assert "exponential regime & 1.2 to 5.7 & supported" in text


def test_tex_escapes_what_latex_would_read(analysis):
    wild = "50% of A_b & {c} #1 $x$ ~ ^ \\input{secret}\nnext"
    text = tex_table(replace(analysis, provenance=replace(analysis.provenance, case=wild)))
    first, second = text.splitlines()[:2]
    assert first == (
        r"% 50\% of A\_b \& \{c\} \#1 \$x\$ \textasciitilde{} \textasciicircum{} \textbackslash{}input\{secret\} next"
    )
    assert second == r"\begin{tabular}{lll}"


def test_improbable_transitions_stay_out_of_the_tex_table(analysis):
    rare = [t for t in analysis.verdict.transitions if t.probability < 0.05]
    assert rare
    only = with_verdict(analysis, transitions=tuple(rare), slopes=(), supported=())
    assert "probability" not in tex_table(only)


# Posterior


@pytest.fixture(scope="module")
def arviz():
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", FutureWarning)  # it announces a later version of itself
        import arviz
    return arviz


@pytest.fixture(scope="module")
def loaded(analysis, arviz, tmp_path_factory):
    path = tmp_path_factory.mktemp("p") / "posterior.nc"
    write_posterior(analysis, path)
    data = arviz.from_netcdf(path, engine="h5netcdf")
    yield data
    data.close()


def test_arviz_reads_every_draw(analysis, loaded):
    inference = analysis.fits["exit_rate"]
    fit = inference.named[0]
    assert fit.model.label == "ERD"
    for i, name in enumerate(("log_rate", "log_transition_1", "log_transition_2")):
        stored = loaded.posterior[f"exit_rate.ERD.{name}"]
        assert stored.dims == ("chain", "draw")
        assert np.array_equal(stored.values, fit.draws[:, :, i])
    assert np.array_equal(loaded.sample_stats["lp.exit_rate.ERD"].values, fit.log_likelihood)
    assert float(loaded.sample_stats["log_evidence.exit_rate.B"]) == -171.0


def test_arviz_finds_the_chains_converged(arviz, loaded):
    # draws of the fixture are independent, so split R-hat is near 1 (Vehtari et al. 2021, below 1.01 is good)
    rhat = arviz.rhat(loaded.posterior[["exit_rate.ERD.log_transition_1"]])
    assert float(rhat["exit_rate.ERD.log_transition_1"]) < 1.02


def test_models_that_were_not_sampled_have_no_draws(loaded):
    assert not [name for name in loaded.posterior if name.startswith("exit_rate.B.")]
    assert loaded.posterior["separation.FFD.spectral_slope_2"].attrs["long_name"].startswith("spectral slope")
