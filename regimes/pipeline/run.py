"""One run, from a case or from pairs already found."""

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

from regimes.analysis import Analysis, Provenance
from regimes.cases import Case
from regimes.inference.fit import exit_rate_space, infer, screen_exit_rates
from regimes.inference.models import free_models, named_models
from regimes.pairs import Pairs
from regimes.pipeline.assemble import put_together
from regimes.pipeline.opinion import second_opinion
from regimes.pipeline.options import Options
from regimes.pipeline.rates import exit_rates
from regimes.pipeline.survey import Survey, check
from regimes.tracks import Tracks, default_gap

Progress = Callable[[str, int, int], None]


def analyse(case: Case, progress: Progress | None = None, jobs: int = 1, seed: int | None = None) -> Analysis:
    """Run a case from its file of fixes to the verdict.

    Parameters
    ----------
    case : Case
    progress : callable, optional
        Called with (stage, done, total).
    jobs : int
        Threads.
    seed : int, optional
        In place of the case's own.

    Returns
    -------
    Analysis

    Raises
    ------
    CaseError, DataError, FitError
    """
    options = Options(
        ratio=case.curves.separation_ratio,
        limits=case.curves.separations,
        regimes=case.models.regimes,
        most_transitions=case.models.most_transitions,
        slope_range=case.report.slope_range,
        seed=case.seed if seed is None else seed,
        jobs=jobs,
    )
    if progress is not None:
        progress("reading fixes", 0, 1)
    survey = check(case)
    if progress is not None:
        progress("reading fixes", 1, 1)
    found = analyse_pairs(survey.tracks, survey.pairs, options, progress)
    return replace(found, provenance=_provenance(survey, case, options.seed, found.provenance))


def analyse_pairs(
    tracks: Tracks, pairs: Pairs, options: Options | None = None, progress: Progress | None = None
) -> Analysis:
    """Analyse pairs already found: the library's way in, no case file needed.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
    options : Options, optional
    progress : callable, optional
        Called with (stage, done, total).

    Returns
    -------
    Analysis

    Raises
    ------
    DataError
        If too few separations are resolved.
    FitError
        If a fit cannot be started.
    """
    options = options or Options()
    rates = exit_rates(tracks, pairs, options)
    seed, jobs = options.seed, options.jobs
    models = named_models(options.regimes, options.most_transitions)
    space = exit_rate_space(rates.likelihood)
    named = screen_exit_rates(rates.likelihood, space, models, seed)
    free = screen_exit_rates(rates.likelihood, space, free_models(), seed + 1)
    how = {"seed": seed, "jobs": jobs, "progress": progress}
    leading = infer("exit_rate", named, free, rates.spread.total, **how)
    second, missing, moved = second_opinion(tracks, rates, (named, free), how)
    return put_together(tracks, pairs, options, rates, (leading, second, missing, moved))


def _provenance(survey: Survey, case: Case, seed: int, found: Provenance) -> Provenance:
    """Provenance with what only the case and the file know."""
    fixes = survey.fixes
    gap = case.observations.longest_gap
    return replace(
        found,
        case=case.name,
        seed=seed,
        source=Path(fixes.source.path).name,
        sha256=fixes.source.sha256 or "",
        n_fixes=len(fixes.time),
        longest_gap=default_gap(fixes, survey.tracks.step) if gap is None else gap,
        max_separation=case.pairs.max_separation,
        cleaning=tuple((c.reason, c.count, c.note) for c in fixes.cleaning),
    )
