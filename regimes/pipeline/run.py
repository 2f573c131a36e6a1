"""One run, from a case or from pairs already found."""

from collections.abc import Callable
from dataclasses import replace

from regimes.analysis import Analysis, SinglesOnly
from regimes.audit import Subject, audit, subject_of
from regimes.cases import Case
from regimes.errors import DataError
from regimes.fitting.options import Options, SingleOptions
from regimes.fitting.quick import fit_rates
from regimes.fitting.rates import exit_rates
from regimes.inference.fit import exit_rate_space, infer, screen_exit_rates
from regimes.inference.models import free_models, named_models
from regimes.pairs import Pairs
from regimes.pipeline.assemble import put_together
from regimes.pipeline.joint import joint_fit
from regimes.pipeline.opinion import second_opinion
from regimes.pipeline.origin import of_case
from regimes.pipeline.other_curves import other_curves
from regimes.pipeline.singles import analyse_singles, single_side, with_releases
from regimes.pipeline.survey import pairs_of, read_tracks
from regimes.tracks import Tracks
from regimes.verdict.finding import Finding

Progress = Callable[[str, int, int], None]


def analyse(
    case: Case, progress: Progress | None = None, jobs: int = 1, seed: int | None = None
) -> Analysis | SinglesOnly:
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
    Analysis or SinglesOnly
        The latter where there is no pair to compare.

    Raises
    ------
    CaseError, DataError, FitError
    """
    options = options_of(case, case.seed if seed is None else seed, jobs)
    if progress is not None:
        progress("reading fixes", 0, 1)
    fixes, tracks = read_tracks(case)
    pairs, no_pair = pairs_of(case, tracks)
    if progress is not None:
        progress("reading fixes", 1, 1)
    if pairs is None:
        found = analyse_singles(tracks, options, no_pair)
    else:
        found = analyse_pairs(tracks, pairs, options, progress)
    return replace(found, provenance=of_case(found.provenance, case, fixes, tracks))


def audit_case(case: Case, progress: Progress | None = None, seed: int | None = None) -> tuple[Finding, ...]:
    """What could fake the result of a case: the audit alone, on the fit by quadrature, without sampling.

    Parameters
    ----------
    case : Case
    progress : callable, optional
        Called with (stage, done, total).
    seed : int, optional
        In place of the case's own.

    Returns
    -------
    tuple of Finding

    Raises
    ------
    CaseError
    DataError
        Also if there is no pair.
    """
    options = options_of(case, case.seed if seed is None else seed, 1)
    _, tracks = read_tracks(case)
    pairs, no_pair = pairs_of(case, tracks)
    if pairs is None:
        raise DataError(no_pair)
    return audit(subject_of(tracks, pairs, options), progress, options.jobs)


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
    tracks = with_releases(tracks, pairs)
    rates = exit_rates(tracks, pairs, options)
    alone = single_side(tracks, options.single, options.seed)
    seed, jobs = options.seed, options.jobs
    models = named_models(options.regimes, options.most_transitions)
    space = exit_rate_space(rates.likelihood)
    named = screen_exit_rates(rates.likelihood, space, models, seed)
    free = screen_exit_rates(rates.likelihood, space, free_models(), seed + 1)
    how = {"seed": seed, "jobs": jobs, "progress": progress}
    leading = infer("exit_rate", named, free, rates.spread.total, **how)
    second, missing, separation, moved = second_opinion(tracks, rates, (named, free), how)
    joint = joint_fit(rates, moved, separation, leading, (named, free), how)
    others = other_curves(tracks, pairs, rates, (leading, moved), options, progress)
    subject = Subject(tracks, pairs, options, fit_rates(rates, options), others.structure)
    findings = audit(subject, progress, options.jobs)
    fits = (leading, second, missing, moved, joint)
    return put_together(tracks, pairs, options, rates, fits, (alone, others, findings))


def options_of(case: Case, seed: int, jobs: int) -> Options:
    """The choices of a case."""
    alone = case.single
    return Options(
        ratio=case.curves.separation_ratio,
        limits=case.curves.separations,
        regimes=case.models.regimes,
        most_transitions=case.models.most_transitions,
        slope_range=case.report.slope_range,
        seed=seed,
        jobs=jobs,
        repetitions=case.curves.repetitions,
        triplets=case.curves.triplets,
        single=SingleOptions(alone.mean, alone.period, alone.mean_flow, alone.deformation_radius),
    )
