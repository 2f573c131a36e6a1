"""Curves of single particles as rows of curves.csv and variables of curves.nc."""

import pandas as pd

from regimes.particles import SingleParticle
from regimes.report.frames import curve_frame, frame, missing, variables


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
    band, nothing = (memory.low, memory.high), missing(memory.lag.size, 2)
    functions = {
        "velocity_autocorrelation": (memory.both, *band, "1"),
        "velocity_autocorrelation_east": (memory.east, *nothing, "1"),
        "velocity_autocorrelation_north": (memory.north, *nothing, "1"),
        "running_integral": (memory.integral, memory.integral_low, memory.integral_high, "s"),
    }
    found = [curve_frame(key, curve, 0) for key, curve in curves.items()]
    return found + [_function(key, single, *parts) for key, parts in functions.items()]


def single_variables(single: SingleParticle | None) -> dict[str, tuple]:
    """The same as netCDF variables over `single_time` and `single_lag`."""
    out = {}
    for rows in [] if single is None else single_frames(single):
        key, axis = rows.curve.iloc[0], f"single_{rows.axis_name.iloc[0]}"
        if axis not in out:
            out[axis] = ((axis,), rows.axis_value.to_numpy(), {"units": "s", "long_name": _AXES[axis]})
        out |= variables(rows, axis, key.replace("_", " "), {"n_cluster": "independent units"})
    return out


_AXES = {"single_time": "time since the first position", "single_lag": "lag"}


def _function(key: str, single: SingleParticle, value, low, high, unit: str) -> pd.DataFrame:
    lag = single.correlation.lag
    return frame(key, ("lag", lag), (value, unit), (*missing(lag.size, 1), low, high), (single.n_unit, 0))
