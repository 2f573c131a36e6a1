"""Curves beside those of `tables.py`, and predictions of all, as rows of curves.csv and variables of curves.nc."""

import numpy as np
import pandas as pd

from regimes.analysis import Analysis
from regimes.checks import Check
from regimes.curves import Curve
from regimes.report.frames import NORMAL95, cf_unit, curve_frame, frame, missing, variables
from regimes.report.words import checked

_AXES = {
    "structure_separation": "geometric mean separation of the samples of a bin",
    "diffusivity_time": "time since first passage",
    "diffusivity_middle_time": "time since first passage, middle of two times",
    "triplet_time": "time since the last of three particles started",
}
_PAIRS = {"n_cluster": "clusters", "n_pair": "pairs"}
_SAMPLES = {"n_cluster": "clusters", "n_pair": "samples of pairs"}
_TRIANGLES = {"n_cluster": "releases", "n_pair": "triangles"}


def every_frames(analysis: Analysis) -> list[pd.DataFrame]:
    """One table for each curve; all in SI units.

    `n_pair` counts samples of pairs for structure functions and triangles for triplets. ``checked_`` rows are the
    data that a predictive check was made with, ``predicted_`` rows the median and 95 % interval of the prediction;
    clusters and pairs of both are not counted.
    """
    return [rows for rows, _, _, _ in _parts(analysis)]


def every_variables(analysis: Analysis) -> dict[str, tuple]:
    """The same as netCDF variables; predictions also with all five percentiles."""
    out = {}
    for rows, axis, words, counts in _parts(analysis):
        if axis not in out and axis not in ("time", "passage_time"):
            about = {"units": rows.axis_unit.iloc[0], "long_name": _AXES.get(axis, f"where {words} is compared")}
            out[axis] = ((axis,), rows.axis_value.to_numpy(), about)
        out |= variables(rows, axis, words, counts)
    for check in analysis.others.checks:
        about = {"units": cf_unit(check.unit), "long_name": f"{checked(check.curve)}, predicted"}
        out[f"band_{check.curve}"] = (("percentile", _axis(check)), check.band, about)
    return out


def _parts(analysis: Analysis) -> list[tuple[pd.DataFrame, str, str, dict[str, str]]]:
    """Rows, dimension, what the curve shows, and what is counted."""
    others = analysis.others
    out = [
        _kurtosis(f"{prefix}kurtosis", statistics)
        for prefix, statistics in (("", analysis.dispersion), ("passage_", analysis.passage_dispersion))
    ]
    structure = others.structure
    for name, curve in (
        ("total", structure.total()),
        ("longitudinal", structure.longitudinal()),
        ("transverse", structure.transverse()),
    ):
        out.append(_part(f"structure_{name}", curve, "structure_separation", _SAMPLES))
    if others.diffusivity is not None:
        found = others.diffusivity
        out.append(_part("relative_diffusivity_velocity", found.from_velocity, "diffusivity_time", _PAIRS))
        out.append(_part("relative_diffusivity_growth", found.from_growth, "diffusivity_middle_time", _PAIRS))
    if others.triplets is not None:
        found = others.triplets
        for name, curve in (("area", found.area), ("side_square", found.side_square), ("aspect", found.aspect)):
            out.append(_part(f"triplet_{name}", curve, "triplet_time", _TRIANGLES))
    for check in others.checks:
        out += _check(check)
    return out


def _part(key: str, curve: Curve, axis: str, counts: dict[str, str]):
    return curve_frame(key, curve, np.rint(curve.weight @ curve.denominator)), axis, curve.name, counts


def _kurtosis(key: str, statistics):
    found = statistics.kurtosis()
    error = found.standard_error
    ends = (found.value - NORMAL95 * error, found.value + NORMAL95 * error)
    counts = (found.n_cluster, np.rint(found.n_sample))
    rows = frame(key, ("time", found.axis), (found.value, "1"), (error, *ends), counts)
    return rows, key.replace("kurtosis", "time"), "kurtosis of the separation", _PAIRS


def _check(check: Check):
    """Data as they were compared, and the prediction at the same places."""
    where, words = (check.axis_name, check.axis), checked(check.curve)
    data = frame(f"checked_{check.curve}", where, (check.value, check.unit), missing(check.axis.size), (0, 0))
    ends = (*missing(check.axis.size, 1), check.band[0], check.band[4])
    prediction = frame(f"predicted_{check.curve}", where, (check.band[2], check.unit), ends, (0, 0))
    return [(data, _axis(check), words, {}), (prediction, _axis(check), f"{words}, predicted median", {})]


def _axis(check: Check) -> str:
    return f"check_{check.curve}_{check.axis_name}"
