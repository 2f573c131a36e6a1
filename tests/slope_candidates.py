"""Three ways to a slope over a range, measured side by side where the truth is known; the last is the default."""

import numpy as np

from regimes.inference.finite_range import finite_range_slope
from regimes.inference.slope import slope_over
from regimes.inference.slope_mixture import slope_of_either

CANDIDATES = ("one power law", "finite range", "both by evidence")
LEVELS = (0.025, 0.16, 0.5, 0.84, 0.975)


def slope_quantiles(likelihood, low: float, high: float, seed: int):
    """(3, 5) quantiles of the draws of alpha by each candidate; NaN where none is quoted."""
    found = (
        slope_over(likelihood, low, high, np.random.default_rng(seed)),
        finite_range_slope(likelihood, low, high, np.random.default_rng(seed)).slope,
        slope_of_either(likelihood, low, high, np.random.default_rng(seed)).slope,
    )
    return np.array([np.quantile(s.draws, LEVELS) if s.draws.size else np.full(5, np.nan) for s in found])


def held(quantiles, truth: float) -> tuple[float, float]:
    """Share of 68 % and of 95 % intervals that hold the truth, of (n, 5) quantiles."""
    low95, low68, _, high68, high95 = quantiles.T
    return (
        float(np.mean((low68 <= truth) & (truth <= high68))),
        float(np.mean((low95 <= truth) & (truth <= high95))),
    )


def held_words(quantiles, truth: float) -> str:
    """Coverage, mean error and mean width as one line."""
    in68, in95 = held(quantiles, truth)
    error, width = np.mean(quantiles[:, 2] - truth), np.mean(quantiles[:, 4] - quantiles[:, 0])
    return (
        f"68 % {in68:.3f}, 95 % {in95:.3f}, mean error {error:+.3f}, width of 95 % {width:.2f}, quoted {len(quantiles)}"
    )
