"""Two sides compared: sampled alike, ranked, fitted alike, decided."""

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor

import numpy as np

from regimes.compare.common import Side, common_step
from regimes.compare.deployments import Plan, plan_of, shortfall
from regimes.compare.fitted import Fitted, common_thresholds, fitted_alike
from regimes.compare.grid import Grid, grid_of
from regimes.compare.launches import launches_of
from regimes.compare.matching import Near
from regimes.compare.ranks import Ranks, rank_curves
from regimes.compare.record import Comparison, Design, Input
from regimes.compare.sums import Raw, Table, raw_sums, table_of
from regimes.compare.unmatched import unmatched_p
from regimes.compare.words import decide, sentence
from regimes.fitting import Options, QuickFit, quick_fit
from regimes.pairs import Pairs
from regimes.pipeline.origin import versions
from regimes.tracks import Tracks

Progress = Callable[[str, int, int], None]
FEW_GROUPS = 6  # below which the spread between groups is hardly known


def compare_sides(
    sides: tuple[Side, Side], deployments: int, near: Near, fit: Options, progress: Progress | None = None
) -> Comparison:
    """Compare pairs already found.

    Parameters
    ----------
    sides : (Side, Side)
        Observed case and model.
    deployments : int
    near : Near
    fit : Options
        Of the fits of both; seed, threads and range of the slope of all.
    progress : callable, optional
        Called with (stage, done, total).

    Returns
    -------
    Comparison

    Raises
    ------
    DataError
        If steps do not fit, groups are too few or too different, or separations do not overlap.
    """
    tell = progress or _silent
    coarse = common_step(*sides)
    swapped = _groups(coarse[1]) < _groups(coarse[0])
    small, large = coarse[::-1] if swapped else coarse
    tell("fitting", 0, 2)
    plan = plan_of(small, large, near, fit.seed)
    streams = [np.random.default_rng(k) for k in np.random.SeedSequence(fit.seed).spawn(3)]
    tracks, pairs = plan.observed(streams[0])
    fits = [quick_fit(tracks, pairs, fit)]
    tell("fitting", 1, 2)
    fits.append(quick_fit(*plan.whole(large, streams[1]), fit))
    tell("fitting", 2, 2)
    ordered = fits[::-1] if swapped else fits
    thresholds = common_thresholds(*(f.rates.likelihood for f in ordered))
    grid = grid_of(tracks, pairs, thresholds)
    table, length = sampled(plan, grid, (tracks, pairs), streams[2], fit.jobs, tell)
    own = np.arange(len(plan.launches))
    ranks = rank_curves(table, plan.pools, own, deployments, fit.seed, tell)
    fitted = fitted_alike(*ordered, fit.slope_range, fit.seed)
    usual = unmatched_p(*sides, thresholds)
    cautions = plan.cautions + shortfall(plan, length, int(pairs.length.sum())) + _few(plan) + _particles(fits)
    return _put_together(sides, (plan, swapped), ranks, fitted, (usual, cautions, fit.seed))


def _put_together(sides, planned: tuple[Plan, bool], ranks: Ranks, fitted: Fitted, rest) -> Comparison:
    plan, swapped = planned
    usual, cautions, seed = rest
    design = Design(
        larger="observed" if swapped else "model",
        groups_small=len(plan.launches),
        groups_large=len(plan.reservoir),
        groups_effective=plan.pools.effective,
        deployments=ranks.n,
        step=plan.large.tracks.step,
        horizon=(plan.horizon - 1) * plan.large.tracks.step,
        position_error=plan.position_error,
    )
    observed, model = (
        Input(s.name, "memory", "", s.tracks.n_track, s.pairs.n_pair, len(launches_of(s.tracks, s.pairs)[0]))
        for s in sides
    )
    return Comparison(
        observed=observed,
        model=model,
        design=design,
        ranks=ranks,
        fitted=fitted,
        unmatched_p=usual,
        same_flow=decide(ranks),
        sentence=sentence(ranks, fitted, usual),
        cautions=cautions,
        seed=seed,
        versions=versions(),
    )


def sampled(
    plan: Plan, grid: Grid, own: tuple[Tracks, Pairs], rng: np.random.Generator, jobs: int = 1, tell=None
) -> tuple[Table, float]:
    """Sums of the smaller set and of all that can stand for its launches; mean pair steps of a deployment."""
    n = len(plan.launches)
    streams = rng.spawn(n)

    def one(unit: int) -> tuple[Raw, float]:
        tracks, pairs = plan.stand_ins(unit, streams[unit])
        return raw_sums(tracks, pairs, grid), float(pairs.length.sum()) / pairs.n_cluster

    parts, steps = [raw_sums(*own, grid)], 0.0
    with ThreadPoolExecutor(jobs) as pool:
        for k, (raw, length) in enumerate(pool.map(one, range(n))):
            parts.append(raw)
            steps += length
            if tell is not None:
                tell("sampling", k + 1, n)
    return table_of(parts, grid), steps


def _groups(side: Side) -> int:
    return len(np.unique(side.pairs.cluster[side.pairs.first]))


def _few(plan: Plan) -> tuple[str, ...]:
    n = len(plan.launches)
    if n >= FEW_GROUPS:
        return ()
    return (f"{plan.small.name[:1].upper()}{plan.small.name[1:]} has only {n} groups: curves of so few vary a lot.",)


def _particles(fits: list[QuickFit]) -> tuple[str, ...]:
    if not any(f.rates.within_release for f in fits):
        return ()
    return ("In the fits particles take the place of groups, since there are too few: their intervals are too narrow.",)


def _silent(_stage: str, _done: int, _total: int) -> None:
    """No progress was asked for."""
