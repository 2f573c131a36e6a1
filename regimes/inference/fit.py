"""Fit every model to a curve: screen, sample, weigh."""

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor, as_completed
from dataclasses import dataclass

import numpy as np

from regimes.errors import FitError
from regimes.inference.evidence import bridge
from regimes.inference.importance import Approximation, approximate, climbed
from regimes.inference.models import Model, Space
from regimes.inference.quadrature import integrate
from regimes.inference.record import Fit, Inference
from regimes.inference.sampler import sample
from regimes.likelihood.exit_rate import ExitRateLikelihood
from regimes.likelihood.joint import JointLikelihood
from regimes.likelihood.separation import SeparationLikelihood

NEGLIGIBLE = np.log(1e-3)  # share of the evidence below which a model is not sampled
_MARGIN = 0.5  # of ln evidence, for the error of the screening
_HOPELESS = 15.0  # ln posterior below the best maximum at which a model is not even screened
_WALKERS = {"exit_rate": 32, "separation": 24, "joint": 24}
_KEPT = 4000  # draws kept of each model, after thinning

Progress = Callable[[str, int, int], None]
Costly = SeparationLikelihood | JointLikelihood


@dataclass(frozen=True, slots=True)
class Posterior:
    """Unnormalised posterior of one model: likelihood times prior density.

    Parameters
    ----------
    evaluate : callable
        log L of (m, size) parameters.
    model : Model
    space : Space
    """

    evaluate: Callable
    model: Model
    space: Space

    def __call__(self, theta):
        theta = np.atleast_2d(theta)
        out = np.full(len(theta), -np.inf)
        inside = self.model.inside(theta, self.space)
        if np.any(inside):
            out[inside] = self.evaluate(theta[inside]) - self.model.log_prior_volume(self.space)
        return out


@dataclass(frozen=True, slots=True)
class Candidate:
    """A model that passed into the screening: its posterior, cheap evidence and draws."""

    posterior: Posterior
    log_evidence: float
    draws: np.ndarray


def exit_rate_space(likelihood: ExitRateLikelihood) -> Space:
    """Range and prior of all models: ln rate within a factor e^12 either side of the mean rate."""
    steps = np.diff(np.log(likelihood.thresholds))
    middle = float(np.log(likelihood.exits.sum() * steps.mean() / likelihood.risk.sum()))
    return Space(
        float(likelihood.thresholds[0]),
        float(likelihood.thresholds[-1]),
        float(steps.mean()),
        (middle - 12, middle + 12),
    )


def screen_exit_rates(likelihood: ExitRateLikelihood, space: Space, models, seed: int) -> list[Candidate]:
    """Evidence and draws of each model by quadrature; models without room for their transitions are left out."""
    rng = np.random.default_rng(seed)
    found = []
    for model in models:
        grid = integrate(likelihood, model, space)
        if grid is not None:
            target = Posterior(_ExitRate(likelihood, model, space), model, space)
            found.append(Candidate(target, grid.log_evidence, grid.sample(1000, rng)))
    return found


@dataclass(frozen=True, slots=True)
class _ExitRate:
    likelihood: ExitRateLikelihood
    model: Model
    space: Space

    def __call__(self, theta):
        return self.likelihood.batch(self.model, theta, self.space)


def screen_costly(
    curve: str, likelihood: Costly, candidates, seed: int, progress: Progress | None = None
) -> tuple[list[Candidate], Costly]:
    """Evidence of each model from the separations, with or without the exit rates, starting from its exit-rate draws.

    Parameters
    ----------
    curve : str
        "separation" or "joint".
    likelihood : SeparationLikelihood or JointLikelihood
    candidates : list of Candidate
    seed : int
    progress : callable, optional
        Called with (stage, done, total).

    Returns
    -------
    candidates : list of Candidate
    likelihood : SeparationLikelihood or JointLikelihood
        Tempered at the best model.

    Notes
    -----
    The tempering is measured at the model with the best untempered composite likelihood that has a
    definite maximum, and is the same for all.
    """
    best: list[tuple[float, Model, np.ndarray]] = []
    for candidate in candidates:
        model, space = candidate.posterior.model, candidate.posterior.space
        values = likelihood.evaluator(model, space)(candidate.draws[:25])
        top = int(np.argmax(values))
        best.append((float(values[top]), model, candidate.draws[top]))
    tempered = _temper(likelihood, sorted(best, key=lambda b: -b[0])[:6], candidates[0].posterior.space)
    found = []
    top = -np.inf
    for i, candidate in enumerate(candidates):
        model, space = candidate.posterior.model, candidate.posterior.space
        target = Posterior(tempered.evaluator(model, space), model, space)
        climb = climbed(target, candidate.draws[:60])
        top = max(top, climb[1])
        if climb[1] < top - _HOPELESS:
            found.append(Candidate(target, climb[1], candidate.draws))
        else:
            guess: Approximation = approximate(target, candidate.draws[:60], climb, seed + i)
            found.append(Candidate(target, guess.log_evidence, guess.draws))
        if progress is not None:
            progress(f"screening the {curve} fits", i + 1, len(candidates))
    return found, tempered


def _temper(likelihood: Costly, best, space: Space) -> Costly:
    reasons = []
    for _, model, theta in best:
        target = Posterior(likelihood.evaluator(model, space), model, space)
        best_theta, _ = climbed(target, theta[None])
        try:
            return likelihood.tempered(model, best_theta, space)
        except FitError as error:
            reasons.append(str(error))
    raise FitError(f"no model has a definite maximum; {reasons[0]}")


def sample_candidates(
    curve: str, groups, seed: int, jobs: int = 1, progress: Progress | None = None
) -> tuple[tuple[Fit, ...], ...]:
    """Sample the candidates of each group that matter, and measure their evidence by bridge sampling.

    Parameters
    ----------
    curve : str
        "exit_rate", "separation" or "joint".
    groups : sequence of lists of Candidate
        Models compete within a group.
    seed : int
    jobs : int
        Threads; the likelihoods release the interpreter.
    progress : callable, optional
        Called with (stage, done, total).

    Returns
    -------
    tuple of tuples of Fit, one a group, in the order given
    """
    chosen = []
    for g, group in enumerate(groups):
        top = max(c.log_evidence for c in group)
        chosen += [(g, i) for i, c in enumerate(group) if c.log_evidence > top + NEGLIGIBLE - _MARGIN]
    chosen.sort(key=lambda place: -groups[place[0]][place[1]].posterior.model.size)  # the longest first
    fits: dict[tuple[int, int], Fit] = {}
    pool = ThreadPoolExecutor(max(jobs, 1))
    try:
        work = {pool.submit(_sample_one, curve, groups[g][i], seed + 1000 * g + i): (g, i) for g, i in chosen}
        for done, future in enumerate(as_completed(work), 1):
            fits[work[future]] = future.result()
            if progress is not None:
                progress(f"sampling the {curve.replace('_', ' ')} fits", done, len(work))
    finally:
        pool.shutdown(wait=False, cancel_futures=True)
    return tuple(
        tuple(fits.get((g, i)) or _unsampled(c) for i, c in enumerate(group)) for g, group in enumerate(groups)
    )


def _unsampled(candidate: Candidate) -> Fit:
    size = candidate.posterior.model.size
    value = candidate.log_evidence
    return Fit(candidate.posterior.model, value, np.nan, value, np.empty((0, 0, size)), np.empty((0, 0)), None)


def _sample_one(curve: str, candidate: Candidate, seed: int) -> Fit:
    start = _starts(candidate, _WALKERS[curve], seed)
    block, longest = (600, 12000) if curve == "exit_rate" else (500, 15000)
    chain = sample(candidate.posterior, start, seed, block, longest)
    walkers, steps, size = chain.draws.shape
    thin = max(1, walkers * steps // _KEPT)
    draws, values = chain.draws[:, ::thin], chain.log_posterior[:, ::thin]
    log_z, error = bridge(candidate.posterior, draws.reshape(-1, size), values.reshape(-1), seed, 1500)
    prior = candidate.posterior.model.log_prior_volume(candidate.posterior.space)
    return Fit(candidate.posterior.model, log_z, error, candidate.log_evidence, draws, values + prior, chain.health)


def _starts(candidate: Candidate, walkers: int, seed: int):
    """Distinct places inside the prior, drawn around the screening draws."""
    rng = np.random.default_rng(seed)
    spread = candidate.draws.std(axis=0) + 1e-3
    found = np.empty((0, candidate.draws.shape[1]))
    for round_ in range(200):
        chosen = candidate.draws[rng.integers(len(candidate.draws), size=4 * walkers)]
        size = 0.1 * 0.95**round_  # ever smaller, for a prior with little room
        moved = chosen + size * spread * rng.standard_normal(chosen.shape)
        found = np.concatenate([found, moved[np.isfinite(candidate.posterior(moved))]])
        if len(found) >= walkers:
            return found[:walkers]
    names = ", ".join(candidate.posterior.model.pieces)
    raise FitError(
        f"sequence {names}: no starting place inside the prior; the resolved range has no room for its transitions; "
        "use data that resolve more separations, or fewer transitions (models.most_transitions)"
    )


def infer(curve: str, named: list[Candidate], free: list[Candidate], dispersion: float, **how) -> Inference:
    """Sample both groups and put them together; `how` is passed to `sample_candidates`."""
    fits = sample_candidates(curve, (named, free), **how)
    return Inference(curve, named[0].posterior.space, fits[0], fits[1], dispersion)
