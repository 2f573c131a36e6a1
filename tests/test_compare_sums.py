"""Sums of launches: adding rows gives the curves of the launches together, by the routes of the other rooms."""

import numpy as np
import pytest

from regimes.compare.grid import Grid, grid_of
from regimes.compare.launches import launches_of
from regimes.compare.sums import N_BIN, raw_sums, table_of
from regimes.compare.taking import Part, taken
from regimes.curves import dispersion_statistics, exit_statistics
from regimes.curves.credit import credited_exits
from regimes.curves.distributions import separation_samples
from regimes.curves.passage import from_passage
from regimes.curves.structure import structure_statistics
from tests.compare_worlds import sea_side


@pytest.fixture(scope="module")
def data():
    side = sea_side(12, 4, duration_d=30.0)
    launches, _ = launches_of(side.tracks, side.pairs)
    nothing = np.empty(0, int)
    parts = [Part(u.members, u.begin, u.n_step, (nothing,) * u.size, u.pairs) for u in launches]
    return taken(side.tracks, parts, 10.0, np.random.default_rng(1))


@pytest.fixture(scope="module")
def grid(data):
    found = grid_of(*data, 1000.0 * np.sqrt(2.0) ** np.arange(8))
    assert found.edges.size  # velocities are resolved
    return found


def test_all_rows_together_give_the_curves_of_the_data(data, grid):
    tracks, pairs = data
    table = table_of([raw_sums(tracks, pairs, grid)], grid)
    curves = table.curves(np.arange(12)[None])
    exits = exit_statistics(tracks, pairs, grid.thresholds)
    rate = exits.log_ratio * credited_exits(exits).sum(axis=0) / exits.time_at_risk.sum(axis=0)
    moved = from_passage(tracks, pairs, grid.thresholds[0])
    since = dispersion_statistics(tracks, moved, grid.times)
    start = dispersion_statistics(tracks, pairs, grid.start_times)
    expected = {
        "exponent": np.log(rate),
        "relative_dispersion": np.log(since.relative_dispersion().value),
        "kurtosis": np.log(since.kurtosis().value),
        "mean_log_growth": start.mean_log_separation().value - np.log(pairs.start_separation).mean(),
        "structure_function": np.log(structure_statistics(tracks, pairs, grid.edges).total().value),
    }
    for name, value in expected.items():
        assert curves[name][0] == pytest.approx(value, rel=1e-12), name  # round-off
    counts = curves["separation_distribution"][0]
    for k, sample in enumerate(separation_samples(tracks, moved, grid.sample_times)):
        edges = 2.0 ** (np.arange(N_BIN + 1) / 4.0)
        assert np.array_equal(counts[k], np.histogram(sample.separation, edges)[0])


def test_parts_add_up(data, grid):
    """Launches measured apart and put together are those measured together."""
    tracks, pairs = data
    whole = table_of([raw_sums(tracks, pairs, grid)], grid)
    own = pairs.cluster[pairs.first]
    halves = [raw_sums(tracks, pairs.select((own < 5) == first), grid) for first in (True, False)]
    both = table_of(halves, grid)
    kept = np.concatenate([np.arange(5), 12 + np.arange(5, 12)])
    chosen = np.array([[0, 7, 9], [4, 5, 11]])
    for name, value in whole.curves(chosen).items():
        assert both.curves(kept[chosen])[name] == pytest.approx(value, rel=1e-9, nan_ok=True), name


def test_a_launch_that_never_passes_adds_nothing(data, grid):
    tracks, pairs = data
    high = Grid(1e7 * np.arange(1.0, 5.0), grid.times, grid.start_times, np.empty(0))
    curves = table_of([raw_sums(tracks, pairs, high)], high).curves(np.array([[0, 1]]))
    assert np.all(np.isnan(curves["relative_dispersion"]))
    assert np.all(np.isfinite(curves["mean_log_growth"]))
    assert "structure_function" not in curves
