"""Cheap evidence of a model whose likelihood is costly: importance sampling around its maximum."""

from dataclasses import dataclass

import numpy as np
from scipy.optimize import minimize
from scipy.special import logsumexp

from regimes.inference.evidence import Mixture


@dataclass(frozen=True, slots=True)
class Approximation:
    """Approximate posterior of one model.

    Parameters
    ----------
    log_evidence : float
    best : (size,) float array
        Parameters of the largest posterior seen.
    best_value : float
        ln posterior there.
    draws : (n, size) float array
        Resampled draws, with repeats.
    effective : float
        Effective number of weights.
    """

    log_evidence: float
    best: np.ndarray
    best_value: float
    draws: np.ndarray
    effective: float


def climbed(log_posterior, guesses) -> tuple[np.ndarray, float]:
    """Parameters of a local maximum of the posterior, by simplex from the best guess, and its value.

    Parameters
    ----------
    log_posterior : callable
        From (m, d) parameters to (m,) ln values; -inf outside the prior.
    guesses : (n, d) float array
        At least one inside the prior.
    """
    first = guesses[int(np.argmax(log_posterior(guesses)))]
    found = minimize(
        lambda t: -float(np.maximum(log_posterior(t[None])[0], -1e12)),
        first,
        method="Nelder-Mead",
        options={
            "maxfev": 50 * first.size,
            "xatol": 1e-2,
            "fatol": 2e-2,
            "initial_simplex": _simplex(first, log_posterior),
        },
    )
    return found.x, -float(found.fun)


def approximate(log_posterior, guesses, climb, seed: int, rounds: int = 3, size: int = 300) -> Approximation:
    """Sample around a maximum with a mixture fitted round by round.

    Parameters
    ----------
    log_posterior : callable
        From (m, d) parameters to (m,) ln values; -inf outside the prior.
    guesses : (n, d) float array
        Draws of a related posterior (the other curve's), which also set the first proposal.
    climb : (array, float)
        From `climbed`.
    seed : int
    rounds, size : int
        Rounds of sampling and draws in each.

    Returns
    -------
    Approximation

    References
    ----------
    Cappe et al. (2004) J. Comput. Graph. Stat. 13, 907, population Monte Carlo; weights by the
    deterministic mixture of all rounds, Cornuet et al. (2012) Scand. J. Stat. 39, 798.
    """
    rng = np.random.default_rng(seed)
    centre = climb[0] - guesses.mean(axis=0)
    proposals = [Mixture(guesses + 0.5 * centre, rng), Mixture(_around(guesses, climb[0]), rng)]
    drawn = [p.sample(size // 2, rng) for p in proposals]
    logs = [log_posterior(d) for d in drawn]
    for _ in range(rounds - 1):
        weight = _weights(proposals, drawn, logs)
        chosen = np.concatenate(drawn)[rng.choice(weight.size, 300, p=np.exp(weight - logsumexp(weight)))]
        proposals.append(Mixture(chosen, rng))
        drawn.append(proposals[-1].sample(size, rng))
        logs.append(log_posterior(drawn[-1]))
    weight = _weights(proposals, drawn, logs)
    every, value = np.concatenate(drawn), np.concatenate(logs)
    total = float(logsumexp(weight))
    share = np.exp(weight - total)
    top = int(np.argmax(value))
    return Approximation(
        total, every[top], float(value[top]), every[rng.choice(share.size, 400, p=share)], float(1 / np.sum(share**2))
    )


def _weights(proposals, drawn, logs):
    """ln importance weights, dividing by the mixture of all proposals; they sum to the evidence."""
    every = np.concatenate(drawn)
    counts = np.array([len(d) for d in drawn], float)
    mixture = logsumexp([np.log(c) + p.log_density(every) for c, p in zip(counts, proposals, strict=True)], axis=0)
    return np.concatenate(logs) - mixture


def _around(guesses, best):
    """The spread of the guesses, moved to the best place."""
    return best + (guesses - guesses.mean(axis=0))


def _simplex(first, log_posterior):
    """Starting simplex whose corners lie inside the prior."""
    corners = [first]
    for j in range(first.size):
        for step in (0.3, -0.3, 0.1, -0.1, 0.02, -0.02):
            moved = first.copy()
            moved[j] += step
            if np.isfinite(log_posterior(moved[None])[0]):
                break
        corners.append(moved)
    return np.array(corners)
