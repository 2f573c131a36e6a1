"""Curves as rows of one table, and the same rows as netCDF variables."""

import numpy as np
import pandas as pd

COLUMNS = (
    "curve", "axis_name", "axis_value", "axis_unit", "value", "unit", "standard_error", "lo95", "hi95",
    "n_cluster", "n_pair",
)  # fmt: skip
NORMAL95 = 1.96
_AXIS_UNIT = {"separation": "m", "time": "s", "lag": "s"}
_NUMBERS = (
    ("", "value", ""),
    ("_standard_error", "standard_error", ", standard error"),
    ("_lo95", "lo95", ", lower 95 % end"),
    ("_hi95", "hi95", ", upper 95 % end"),
)
# As the conventions for netCDF write them; logarithms of a number of metres have no unit.
_CF = {"1/s": "s-1", "m/s": "m s-1", "m2/s": "m2 s-1", "m2/s2": "m2 s-2", "ln m": "1", "ln m2": "1"}


def frame(key: str, axis, value, errors, counts) -> pd.DataFrame:
    """Rows of one curve.

    Parameters
    ----------
    key : str
        Short name.
    axis : (str, (n,) float array [m or s])
        Name of the axis ("separation", "time" or "lag") and where the bins stand.
    value : ((n,) float array, str)
        Values and their unit.
    errors : (standard error, lower 95 % end, upper 95 % end)
        Each (n,) float array; NaN where there is none.
    counts : (int or (n,) array, int or (n,) array)
        Clusters and pairs behind each value.
    """
    columns = (key, axis[0], axis[1], _AXIS_UNIT[axis[0]], *value, *errors, *counts)
    return pd.DataFrame(dict(zip(COLUMNS, columns, strict=True))).astype({"n_cluster": int, "n_pair": int})


def curve_frame(key: str, curve, n_pair) -> pd.DataFrame:
    """Rows of a `Curve`: plus and minus 1.96 standard errors from the scatter of clusters."""
    error = curve.standard_error
    ends = (curve.value - NORMAL95 * error, curve.value + NORMAL95 * error)
    return frame(
        key, (curve.axis_name, curve.axis), (curve.value, curve.unit), (error, *ends), (curve.n_cluster, n_pair)
    )


def missing(n: int, number: int = 3) -> tuple[np.ndarray, ...]:
    """So many columns of n missing numbers."""
    return tuple(np.full(n, np.nan) for _ in range(number))


def variables(rows: pd.DataFrame, axis: str, words: str, counts: dict[str, str]) -> dict[str, tuple]:
    """netCDF variables of one curve.

    Parameters
    ----------
    rows : pandas.DataFrame
        As `frame` makes them.
    axis : str
        Name of the dimension.
    words : str
        What the curve shows.
    counts : dict of str to str
        Columns of numbers to write, and what they count.
    """
    key, unit = rows.curve.iloc[0], cf_unit(rows.unit.iloc[0])
    out = {
        key + suffix: ((axis,), rows[column].to_numpy(), {"units": unit, "long_name": words + more})
        for suffix, column, more in _NUMBERS
    }
    for column, counted in counts.items():
        attributes = {"units": "1", "long_name": f"number of {counted} behind {words}"}
        out[f"{key}_{column}"] = ((axis,), rows[column].to_numpy(), attributes)
    return out


def cf_unit(unit: str) -> str:
    """A unit as the conventions for netCDF write it."""
    return _CF.get(unit, unit)
