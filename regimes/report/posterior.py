"""Every draw of every sampled model, in netCDF groups that ArviZ reads."""

from pathlib import Path

import numpy as np
import xarray as xr

from regimes.analysis import Analysis
from regimes.inference.record import Fit

UNITS = {
    "log_rate": ("ln(1/s)", "ln of kernel over squared separation at the reference separation"),
    "spectral_slope": (
        "1",
        "spectral slope of a free piece; the kernel exponent saturates below 1 and above 3",
    ),
    "log_transition": ("ln(m)", "ln of a transition separation"),
}
LAYOUT = (
    "Variables are named curve.model.parameter; a model is a sequence of pieces from small to large "
    "separations, one letter each: B ballistic, E exponential, R richardson, D diffusive, F free. "
    "Walkers of the ensemble are the chains."
)


def write_posterior(analysis: Analysis, path: Path) -> None:
    """Write groups `posterior` and `sample_stats`.

    Parameters
    ----------
    analysis : Analysis
    path : Path
        Overwritten.

    Notes
    -----
    Dimensions are chain (walkers) and draw (thinned steps). Models may differ in both; what a model does not
    have is NaN. In `sample_stats`, ``lp.curve.model`` is the log likelihood, which is the log posterior but for
    a constant (the priors are uniform), and ``log_evidence.curve.model`` the log evidence (a scalar).
    """
    fits = [(curve, fit) for curve, inference in analysis.fits.items() for fit in (*inference.named, *inference.free)]
    sampled = [(curve, fit) for curve, fit in fits if fit.sampled]
    shapes = np.array([fit.draws.shape[:2] for _, fit in sampled] or [(0, 0)])
    size = (int(shapes[:, 0].max()), int(shapes[:, 1].max()))
    draws, statistics = {}, {}
    for curve, fit in sampled:
        draws.update(_parameters(curve, fit, size))
        statistics[f"lp.{curve}.{fit.model.label}"] = (
            ("chain", "draw"),
            _padded(fit.log_likelihood, size),
            {"units": "1"},
        )
    for curve, fit in fits:
        statistics[f"log_evidence.{curve}.{fit.model.label}"] = ((), fit.log_evidence, {"units": "1"})
    coordinates = {"chain": np.arange(size[0]), "draw": np.arange(size[1])}
    header = {
        "title": f"posterior draws of {analysis.provenance.case}",
        "comment": LAYOUT,
        "seed": analysis.provenance.seed,
    }
    for mode, group, variables in (("w", "posterior", draws), ("a", "sample_stats", statistics)):
        dataset = xr.Dataset(variables, coordinates, header)
        dataset.to_netcdf(path, mode=mode, group=group, engine="h5netcdf")


def _parameters(curve: str, fit: Fit, size: tuple[int, int]) -> dict[str, tuple]:
    out = {}
    for i, name in enumerate(fit.model.parameters):
        unit, long_name = UNITS[name.rstrip("_0123456789")]
        values = _padded(fit.draws[:, :, i], size)
        out[f"{curve}.{fit.model.label}.{name}"] = (
            ("chain", "draw"),
            values,
            {"units": unit, "long_name": long_name},
        )
    return out


def _padded(values: np.ndarray, size: tuple[int, int]) -> np.ndarray:
    full = np.full(size, np.nan)
    full[: values.shape[0], : values.shape[1]] = values
    return full
