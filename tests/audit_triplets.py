"""Small surveys of triplets in an exponential world: quick to simulate and to fit."""

from datetime import UTC, datetime

from regimes.audit.subject import Subject, subject_of
from regimes.fitting import Options
from regimes.pairs import Pairs, find_pairs
from regimes.synthetic import recipe_from, simulate
from regimes.tracks import Tracks, make_tracks
from regimes.units import HOUR

START = datetime(2031, 3, 2, 6, tzinfo=UTC)


def survey(seed: int, number: int = 12, place: bool = False, spread_km: float = 0.0, **records) -> tuple[Tracks, Pairs]:
    """Triplets followed for 20 days every 2 hours, on a plane or the globe; `records` change how they are watched."""
    content = {
        "name": "test",
        "seed": seed,
        "kernel": {"exponents": [2.0], "rate_per_d": 0.3, "reference_km": 1.0},
        "releases": {"number": number, "particles": 3, "start_separation_km": 0.4, "first": START},
        "records": {"duration_d": 20.0, "fix_interval_h": 2.0, "position_error_m": 10.0} | records,
    }
    content["place"] = {"spread_km": spread_km} | ({"longitude": 30.0, "latitude": -20.0} if place else {})
    tracks = make_tracks(simulate(recipe_from(content)), 2 * HOUR, 6 * HOUR)
    return tracks, find_pairs(tracks, "launched", 1000.0, 6 * HOUR)


# Few pairs; on the globe with gaps; short and lossy.
ODD = {
    "few": {"number": 5, "loss_per_d": 0.02},
    "globe, gaps": {"number": 8, "place": True, "gap_probability": 0.05, "gap_h": 12.0},
    "lossy": {"number": 10, "loss_per_d": 0.1},
}


def odd(name: str) -> Subject:
    """Subject of one of the odd surveys."""
    return subject_of(*survey(7, **ODD[name]), Options())
