"""Two data sets from worlds of known truth, as the comparison takes them."""

from datetime import datetime

import numpy as np

from regimes.compare import Side, side_of
from regimes.pairs import find_pairs
from regimes.synthetic import recipe_from, simulate
from regimes.tracks import make_tracks
from regimes.units import HOUR
from tests.worlds import survey_recipe

RICHARDSON_BEYOND_10 = {"exponents": [2.0, 4.0 / 3.0], "transitions_km": [10.0], "rate_per_d": 0.6, "reference_km": 5.0}
# Exponents 1.5 times as large below 7 km, falling to the same from 10 km on: K(10 km) / K(7 km) = (10/7)^2 / 1.5.
FASTER_BELOW_10 = {
    "exponents": [2.0, 2.0 - np.log(1.5) / np.log(10 / 7), 4.0 / 3.0],
    "transitions_km": [7.0, 10.0],
    "rate_per_d": 0.9,
    "reference_km": 5.0,
}


def simulated(recipe: dict, name: str = "the model", step: float | None = None) -> Side:
    """A side from the content of a recipe."""
    fixes = simulate(recipe_from(recipe))
    interval = recipe["records"]["fix_interval_h"] * HOUR
    tracks = make_tracks(fixes, step or interval, 3 * interval)
    return side_of(name, tracks, find_pairs(tracks))[0]


def kernel_side(number: int, seed: int, kernel=RICHARDSON_BEYOND_10, name="the model", **records) -> Side:
    """Releases of three in a kernel world on a plane."""
    seen = {"duration_d": 30.0, "fix_interval_h": 3.0, "position_error_m": 10.0} | records
    releases = {
        "number": number,
        "particles": 3,
        "start_separation_km": 0.4,
        "first": datetime(2031, 3, 2, 6),
        "interval_h": 12.0,
    }
    return simulated({"name": "x", "seed": seed, "kernel": kernel, "releases": releases, "records": seen}, name)


def sea_side(number: int, seed: int, name="the model", **records) -> Side:
    """Releases in the demo's sea, 3-hourly for 60 days unless said otherwise."""
    recipe = survey_recipe(seed)
    recipe["releases"] |= {"number": number, "interval_h": 3.0}
    recipe["records"] |= {"duration_d": 60.0, "fix_interval_h": 3.0} | records
    return simulated(recipe, name)


def some(side: Side, clusters, name: str | None = None) -> Side:
    """The side with some of its clusters."""
    chosen = np.isin(side.pairs.cluster[side.pairs.first], clusters)
    return Side(name or side.name, side.tracks, side.pairs.select(chosen))
