"""Time of the exit and dispersion passes against a vectorised great-circle script on the same pairs.

Run by hand: ``python tests/benchmarks/bench_curves.py [releases]``. The script is what one would write in
numpy, once as usual and once with every common trick: haversine distances of each pair's whole record, first
passages, squared separations at the lags. All run in one process on one core; the best of several is taken.
"""

import resource
import sys
import time

import numpy as np

from regimes.curves import default_times, dispersion_statistics, exit_statistics
from regimes.geodesy import to_geographic
from regimes.pairs import find_pairs
from regimes.synthetic import recipe_from, simulate
from regimes.tracks import make_tracks

RADIUS = 6371008.8  # m


def world(n_release):
    """Hourly fixes of triplets over 60 days, no gaps, so that the script needs no care for them."""
    recipe = recipe_from(
        {
            "name": "benchmark",
            "seed": 1,
            "kernel": {
                "regimes": ["exponential", "richardson", "diffusive"],
                "transitions_km": [10.0, 120.0],
                "rate_per_d": 0.5,
                "reference_km": 1.0,
            },
            "releases": {
                "number": n_release,
                "particles": 3,
                "start_separation_km": 0.5,
                "first": np.datetime64("2031-05-01T00:00:00").item(),
            },
            "records": {"duration_d": 60.0, "fix_interval_h": 1.0},
            "place": {"longitude": 10.0, "latitude": 45.0, "spread_km": 100.0},
        }
    )
    tracks = make_tracks(simulate(recipe), step=3600.0)
    return tracks, find_pairs(tracks, "launched", 2000.0, 6 * 3600.0)


def haversine(lon1, lat1, lon2, lat2):
    """Great-circle distance of points in degrees, as it is usually written [m]."""
    lon1, lat1, lon2, lat2 = np.radians(lon1), np.radians(lat1), np.radians(lon2), np.radians(lat2)
    half = np.sin(0.5 * (lat2 - lat1)) ** 2 + np.cos(lat1) * np.cos(lat2) * np.sin(0.5 * (lon2 - lon1)) ** 2
    return 2.0 * RADIUS * np.arcsin(np.sqrt(half))


def usual_script(places, spans, thresholds, lags, step):
    """Whole records per pair: haversine in degrees, first sample at or beyond each threshold by argmax."""
    exits, risk = np.zeros(thresholds.size - 1), np.zeros(thresholds.size - 1)
    square, count = np.zeros(lags.size), np.zeros(lags.size)
    lon, lat = places
    for a, b, n in spans:
        r = haversine(lon[a : a + n], lat[a : a + n], lon[b : b + n], lat[b : b + n])
        beyond = r[None, :] >= thresholds[:, None]
        first = np.where(beyond.any(axis=1), beyond.argmax(axis=1), n)
        add(r, first, thresholds, lags, step, (exits, risk, square, count))
    return exits, risk, square / count


def tuned_script(places, spans, thresholds, lags, step):
    """The same with radians and cosines prepared once, and first passages by bisection of the running maximum."""
    exits, risk = np.zeros(thresholds.size - 1), np.zeros(thresholds.size - 1)
    square, count = np.zeros(lags.size), np.zeros(lags.size)
    lon, lat = (np.radians(x) for x in places)
    cosine = np.cos(lat)
    for a, b, n in spans:
        i, j = slice(a, a + n), slice(b, b + n)
        half = np.sin(0.5 * (lat[j] - lat[i])) ** 2 + cosine[i] * cosine[j] * np.sin(0.5 * (lon[j] - lon[i])) ** 2
        r = 2.0 * RADIUS * np.arcsin(np.sqrt(half))
        first = np.searchsorted(np.maximum.accumulate(r), thresholds)
        add(r, first, thresholds, lags, step, (exits, risk, square, count))
    return exits, risk, square / count


def add(r, first, thresholds, lags, step, sums):
    """Add exits, time at risk and squared separations of one pair."""
    n = r.size
    exits, risk, square, count = sums
    started = (first[:-1] < n) & (r[0] <= thresholds[:-1])
    exits += started & (first[1:] < n)
    risk += np.where(started, np.minimum(first[1:], n - 1) - first[:-1], 0) * step
    near = lags[lags < n]
    square[: near.size] += r[near] ** 2
    count[: near.size] += 1


def best(function, repeats=3):
    """Shortest time of some runs, and the result."""
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        result = function()
        times.append(time.perf_counter() - start)
    return min(times), result


def main():
    n_release = int(sys.argv[1]) if len(sys.argv) > 1 else 400
    tracks, pairs = world(n_release)
    thresholds = 1000.0 * 2.0 ** (np.arange(16) / 2)
    times = default_times(pairs, tracks.step)
    lags = np.rint(times / tracks.step).astype(int)
    starts = [tracks.offset[m] + pairs.begin - tracks.start_step[m] for m in (pairs.first, pairs.second)]
    spans = np.stack([*starts, pairs.length], axis=1)
    script = (to_geographic(tracks.position), spans, thresholds, lags, tracks.step)

    def passes():
        return exit_statistics(tracks, pairs, thresholds), dispersion_statistics(tracks, pairs, times)

    passes()  # compile
    fast, (exits, dispersion) = best(passes, 7)
    total = exits.weight @ exits.exits, exits.weight @ exits.time_at_risk, dispersion.relative_dispersion().value
    samples = int(pairs.length.sum())
    lines = [
        f"{pairs.n_pair} pairs, {samples} pair samples",
        f"passes: {fast * 1e3:.1f} ms, {fast / samples * 1e9:.1f} ns a sample",
    ]
    for name, function in (("usual", usual_script), ("tuned", tuned_script)):
        slow, expected = best(lambda function=function: function(*script))
        lines.append(f"{name} numpy script: {slow * 1e3:.1f} ms, ratio {slow / fast:.1f}")
    for name, found, wanted in zip(("exits", "time at risk", "dispersion"), total, expected, strict=True):
        difference = np.max(np.abs(found[wanted > 0] / wanted[wanted > 0] - 1))
        lines.append(f"largest difference in {name}: {100 * difference:.2f} % (ellipsoid against sphere)")
    lines.append(f"peak memory {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024:.0f} MB")
    sys.stdout.write("\n".join(lines) + "\n")


if __name__ == "__main__":
    main()
