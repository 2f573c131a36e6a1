"""Two sides compared: sampled alike, ranked, fitted alike, decided."""

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor

import numpy as np

from regimes.compare.common import Side, common_step
from regimes.compare.deployments import Plan, plan_of, shortfall
from regimes.compare.fitted import Fitted, common_thresholds, fitted_alike
from regimes.compare.launches import launches_of
from regimes.compare.matching import Near
from regimes.compare.measured import Grid, Measured, grid_of, measure
from regimes.compare.ranks import Ranks, rank_curves
from regimes.compare.record import Comparison, Design, Input
from regimes.compare.unmatched import unmatched_p
from regimes.compare.words import decide, sentence
from regimes.errors import DataError
from regimes.fitting import Options, QuickFit, quick_fit
from regimes.pipeline.origin import versions

Progress = Callable[[str, int, int], None]
FEW_GROUPS = 6  # below which the spread between groups is hardly known
_LEAST_MEASURED = 0.8  # share of the deployments


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
    streams = np.random.SeedSequence(fit.seed).spawn(deployments + 2)
    tracks, pairs = plan.observed(np.random.default_rng(streams[0]))
    fits = [quick_fit(tracks, pairs, fit)]
    tell("fitting", 1, 2)
    fits.append(quick_fit(*plan.whole(large, np.random.default_rng(streams[1])), fit))
    tell("fitting", 2, 2)
    ordered = fits[::-1] if swapped else fits
    thresholds = common_thresholds(*(f.rates.likelihood for f in ordered))
    grid = grid_of(tracks, pairs, thresholds)
    drawn, short = _deployments(plan, grid, streams[2:], fit.jobs, tell)
    ranks = rank_curves(measure(tracks, pairs, grid), drawn, grid, plan.scale)
    fitted = fitted_alike(*ordered, fit.slope_range, fit.seed)
    usual = unmatched_p(*sides, thresholds)
    cautions = plan.cautions + shortfall(plan, short, int(pairs.length.sum())) + _few(plan) + _particles(fits)
    return _put_together(sides, (plan, swapped), ranks, fitted, (usual, cautions, fit.seed))


def _put_together(sides, planned: tuple[Plan, bool], ranks: Ranks, fitted: Fitted, rest) -> Comparison:
    plan, swapped = planned
    usual, cautions, seed = rest
    design = Design(
        larger="observed" if swapped else "model",
        groups_small=len(plan.launches),
        groups_large=len(plan.reservoir),
        groups_effective=plan.effective,
        deployments=ranks.n,
        step=plan.large.tracks.step,
        horizon=(plan.horizon - 1) * plan.large.tracks.step,
        position_error=plan.position_error,
        scale=plan.scale,
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


def _deployments(plan: Plan, grid: Grid, streams, jobs: int, tell: Progress) -> tuple[list[Measured], float]:
    """Curves of every virtual deployment, and their mean number of pair steps."""

    def one(stream) -> tuple[Measured | None, int]:
        tracks, pairs = plan.draw(np.random.default_rng(stream))
        try:
            return measure(tracks, pairs, grid), int(pairs.length.sum())
        except DataError:
            return None, int(pairs.length.sum())  # no pair of this deployment got as far

    found, steps = [], 0
    with ThreadPoolExecutor(jobs) as pool:
        for i, (result, length) in enumerate(pool.map(one, streams)):
            steps += length
            if result is not None:
                found.append(result)
            tell("virtual deployments", i + 1, len(streams))
    if len(found) < _LEAST_MEASURED * len(streams):
        raise DataError(
            f"compare: got {len(found)} of {len(streams)} virtual deployments of {plan.large.name} in which a pair "
            f"passes {grid.thresholds[0] / 1000:.3g} km; must be {_LEAST_MEASURED:.0%} at least; use longer records"
        )
    return found, steps / len(streams)


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
