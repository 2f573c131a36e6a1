"""Curves of single particles as rows of curves.csv and variables of curves.nc."""

import numpy as np
import pandas as pd

from regimes.curves import Curve
from regimes.particles import SingleParticle

NORMAL95 = 1.96


def single_frames(single: SingleParticle) -> list[pd.DataFrame]:
    """One table for each curve; all in SI units, `n_cluster` counts independent units, `n_pair` is zero.

    Displacements have intervals of plus and minus 1.96 standard errors from the scatter of units; the correlation and
    its integral have those of the resamples, and no standard error.
    """
    moved, memory = single.dispersion, single.correlation
    curves = {
        "absolute_dispersion": moved.total,
        "absolute_dispersion_east": moved.east,
        "absolute_dispersion_north": moved.north,
        "mean_displacement_east": moved.mean_east,
        "mean_displacement_north": moved.mean_north,
    }
    band, nothing = (memory.low, memory.high), (np.full(memory.lag.size, np.nan),) * 2
    functions = {
        "velocity_autocorrelation": (memory.both, *band, "1"),
        "velocity_autocorrelation_east": (memory.east, *nothing, "1"),
        "velocity_autocorrelation_north": (memory.north, *nothing, "1"),
        "running_integral": (memory.integral, memory.integral_low, memory.integral_high, "s"),
    }
    found = [_displacement(key, curve) for key, curve in curves.items()]
    return found + [_function(key, single, *parts) for key, parts in functions.items()]


def single_variables(single: SingleParticle | None) -> dict[str, tuple]:
    """The same as netCDF variables over `single_time` and `single_lag`."""
    out = {}
    for frame in [] if single is None else single_frames(single):
        key, axis = frame.curve.iloc[0], f"single_{frame.axis_name.iloc[0]}"
        words = key.replace("_", " ")
        if axis not in out:
            out[axis] = ((axis,), frame.axis_value.to_numpy(), {"units": "s", "long_name": _AXES[axis]})
        for suffix, column, more in (
            ("", "value", ""),
            ("_standard_error", "standard_error", ", standard error"),
            ("_lo95", "lo95", ", lower 95 % end"),
            ("_hi95", "hi95", ", upper 95 % end"),
        ):
            attributes = {"units": frame.unit.iloc[0], "long_name": words + more}
            out[key + suffix] = ((axis,), frame[column].to_numpy(), attributes)
        attributes = {"units": "1", "long_name": f"number of independent units behind {words}"}
        out[f"{key}_n_cluster"] = ((axis,), frame.n_cluster.to_numpy(), attributes)
    return out


_AXES = {"single_time": "time since the first position", "single_lag": "lag"}


def _displacement(key: str, curve: Curve) -> pd.DataFrame:
    error = curve.standard_error
    ends = (curve.value - NORMAL95 * error, curve.value + NORMAL95 * error)
    return _frame(key, ("time", curve.axis), (curve.value, curve.unit), (error, *ends), curve.n_cluster)


def _function(key: str, single: SingleParticle, value, low, high, unit: str) -> pd.DataFrame:
    lag = single.correlation.lag
    return _frame(key, ("lag", lag), (value, unit), (np.full(lag.size, np.nan), low, high), single.n_unit)


def _frame(key: str, axis, value, errors, n_unit) -> pd.DataFrame:
    return pd.DataFrame(
        {
            "curve": key, "axis_name": axis[0], "axis_value": axis[1], "axis_unit": "s", "value": value[0],
            "unit": value[1], "standard_error": errors[0], "lo95": errors[1], "hi95": errors[2],
            "n_cluster": n_unit, "n_pair": 0,
        }
    )  # fmt: skip
