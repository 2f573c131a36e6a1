"""Curves as tables for other programs."""

from pathlib import Path

import numpy as np
import pandas as pd
import xarray as xr

from regimes.analysis import Analysis, SinglesOnly
from regimes.curves import Curve
from regimes.report.digits import span
from regimes.report.every_tables import every_frames, every_variables
from regimes.report.frames import COLUMNS, curve_frame, variables
from regimes.report.single_tables import single_frames, single_variables

_COUNTS = {"n_cluster": "clusters", "n_pair": "pairs"}


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
        standard errors. For rows of checks see `every_frames`.
    """
    return pd.concat(_frames(analysis) + every_frames(analysis), ignore_index=True)


def _frames(analysis: Analysis) -> list[pd.DataFrame]:
    frames = []
    for key, (curve, pairs) in curves_of(analysis).items():
        rows = curve_frame(key, curve, pairs)
        if key == "exponent":
            rates = analysis.rates
            error = 0.5 * (rates.high68 - rates.low68)  # of the same pooled dispersion
            rows = rows.assign(value=rates.rate, standard_error=error, lo95=rates.low95, hi95=rates.high95)
        frames.append(rows)
    return frames


def write_curves_csv(analysis: Analysis | SinglesOnly, path: Path) -> None:
    """`curve_table` and the curves of single particles as CSV; empty where not determined."""
    frames = [] if isinstance(analysis, SinglesOnly) else [curve_table(analysis)]
    frames += [] if analysis.single is None else single_frames(analysis.single)
    table = pd.concat(frames, ignore_index=True) if frames else pd.DataFrame(columns=list(COLUMNS))
    table.to_csv(path, index=False, float_format="%.8g", lineterminator="\n")


def write_curves_netcdf(analysis: Analysis, path: Path) -> None:
    """`curve_table`, the predicted bands and the curves of single particles as netCDF, with units and long names."""
    found: dict[str, tuple] = {}
    for rows, (key, (curve, _)) in zip(_frames(analysis), curves_of(analysis).items(), strict=True):
        axis = ("passage_" if key.startswith("passage_") else "") + curve.axis_name
        found |= variables(rows, axis, curve.name, _COUNTS)
    found |= _rate_variables(analysis) | _band_variables(analysis)
    found |= every_variables(analysis) | single_variables(analysis.single)
    xr.Dataset(found, _coordinates(analysis), _header(analysis)).to_netcdf(path, engine="h5netcdf")


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
