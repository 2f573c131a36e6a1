"""Curves as tables for other programs."""

from pathlib import Path

import numpy as np
import pandas as pd
import xarray as xr

from regimes.analysis import Analysis, SinglesOnly
from regimes.curves import Curve
from regimes.report.digits import span
from regimes.report.single_tables import single_frames, single_variables

COLUMNS = (
    "curve", "axis_name", "axis_value", "axis_unit", "value", "unit", "standard_error", "lo95", "hi95",
    "n_cluster", "n_pair",
)  # fmt: skip
AXIS_UNIT = {"separation": "m", "time": "s"}
NORMAL95 = 1.96


def curves_of(analysis: Analysis) -> dict[str, tuple[Curve, np.ndarray]]:
    """Every curve of the report by a short key, with the number of pairs behind each value."""
    since_start, since_passage = analysis.dispersion, analysis.passage_dispersion
    out = {"exponent": (analysis.exponent, analysis.rates.n_pair)}
    for prefix, statistics in (("", since_start), ("passage_", since_passage)):
        pairs = statistics.weight @ statistics.count
        out[prefix + "dispersion"] = (statistics.relative_dispersion(), pairs)
        out[prefix + "dispersion_east"] = (statistics.east(), pairs)
        out[prefix + "dispersion_north"] = (statistics.north(), pairs)
        out[prefix + "mean_log_separation"] = (
            statistics.mean_log_separation(),
            statistics.weight @ statistics.log_count,
        )
    return out


def curve_table(analysis: Analysis) -> pd.DataFrame:
    """One row per curve and bin; lengths, times and values in SI units.

    Returns
    -------
    pandas.DataFrame
        Columns as in `COLUMNS`. Error (half the 68 % interval) and interval of the exponent are those of the pooled
        dispersion; those of every other curve come from the scatter of clusters, the interval plus and minus 1.96
        standard errors.
    """
    frames = []
    for key, (curve, pairs) in curves_of(analysis).items():
        error = curve.standard_error
        low, high = curve.value - NORMAL95 * error, curve.value + NORMAL95 * error
        value = curve.value
        if key == "exponent":
            value, low, high = analysis.rates.rate, analysis.rates.low95, analysis.rates.high95
            error = 0.5 * (analysis.rates.high68 - analysis.rates.low68)  # of the same pooled dispersion
        columns = (
            key, curve.axis_name, curve.axis, AXIS_UNIT[curve.axis_name], value, curve.unit, error, low, high,
            curve.n_cluster, pairs,
        )  # fmt: skip
        frames.append(pd.DataFrame(dict(zip(COLUMNS, columns, strict=True))))
    table = pd.concat(frames, ignore_index=True)
    return table.astype({"n_cluster": int, "n_pair": int})


def write_curves_csv(analysis: Analysis | SinglesOnly, path: Path) -> None:
    """`curve_table` and the curves of single particles as CSV; empty where not determined."""
    frames = [] if isinstance(analysis, SinglesOnly) else [curve_table(analysis)]
    frames += [] if analysis.single is None else single_frames(analysis.single)
    table = pd.concat(frames, ignore_index=True) if frames else pd.DataFrame(columns=list(COLUMNS))
    table.to_csv(path, index=False, float_format="%.8g", lineterminator="\n")


def write_curves_netcdf(analysis: Analysis, path: Path) -> None:
    """`curve_table`, the predicted bands and the curves of single particles as netCDF, with units and long names."""
    table = curve_table(analysis)
    variables: dict[str, tuple] = {}
    for key, (curve, _) in curves_of(analysis).items():
        rows = table[table.curve == key]
        axis = ("passage_" if key.startswith("passage_") else "") + curve.axis_name
        unit = "1" if curve.unit == "ln m" else curve.unit.replace("1/s", "s-1")
        variables[key] = ((axis,), rows.value.to_numpy(), {"units": unit, "long_name": curve.name})
        for column, words in (
            ("standard_error", "standard error"),
            ("lo95", "lower 95 % end"),
            ("hi95", "upper 95 % end"),
        ):
            attributes = {"units": unit, "long_name": f"{curve.name}, {words}"}
            variables[f"{key}_{column}"] = ((axis,), rows[column].to_numpy(), attributes)
        for column, words in (("n_cluster", "clusters"), ("n_pair", "pairs")):
            attributes = {"units": "1", "long_name": f"number of {words} behind {curve.name}"}
            variables[f"{key}_{column}"] = ((axis,), rows[column].to_numpy(), attributes)
    variables.update(_rate_variables(analysis) | _band_variables(analysis) | single_variables(analysis.single))
    xr.Dataset(variables, _coordinates(analysis), _header(analysis)).to_netcdf(path, engine="h5netcdf")


def _header(analysis: Analysis) -> dict[str, str]:
    origin = analysis.provenance
    return {
        "Conventions": "CF-1.10",
        "title": f"pair separation curves of {origin.case}",
        "source": f"{origin.source}, sha256 {origin.sha256}",
        "comment": f"resolved: {span(*analysis.verdict.resolved)} km; seed {origin.seed}",
    }


def _coordinates(analysis: Analysis) -> dict[str, tuple]:
    length, time = {"units": "m"}, {"units": "s"}
    return {
        "separation": ("separation", analysis.exponent.axis, length | {"long_name": "lower threshold"}),
        "time": ("time", analysis.dispersion.times, time | {"long_name": "time since the start of the pair"}),
        "passage_time": (
            "passage_time", analysis.passage_dispersion.times,
            time | {"long_name": f"time since first passage of {analysis.passage_separation:.6g} m"},
        ),
        "band_separation": (
            "band_separation", analysis.bands.separation, length | {"long_name": "lower threshold"}
        ),
        "percentile": (
            "percentile", [2.5, 16.0, 50.0, 84.0, 97.5], {"units": "percent", "long_name": "percentile"}
        ),
    }  # fmt: skip


def _rate_variables(analysis: Analysis) -> dict[str, tuple]:
    rates = analysis.rates
    words = "exponent from completed exits only, biased where records end"
    return {
        "exponent_textbook": ("separation", rates.textbook, {"units": "s-1", "long_name": words}),
        "exponent_zero_fraction": (
            "separation", rates.zero_fraction, {"units": "1", "long_name": "share of exits within one sample"}
        ),
        "exponent_resolved": (
            "separation", rates.resolved.astype(np.int8),
            {"units": "1", "long_name": "1 where the interval entered the fit"},
        ),
    }  # fmt: skip


def _band_variables(analysis: Analysis) -> dict[str, tuple]:
    bands = analysis.bands
    table = {
        "band_exponent_named": (
            bands.rate_named,
            "band_separation",
            "s-1",
            "exponent of the named sequences",
        ),
        "band_exponent_free": (
            bands.rate_free,
            "band_separation",
            "s-1",
            "exponent of the free-exponent kernels",
        ),
    }
    return {
        name: (("percentile", axis), values, {"units": unit, "long_name": words})
        for name, (values, axis, unit, words) in table.items()
    }
