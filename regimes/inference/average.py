"""What all models say together: regimes by separation, local exponent, slope over a range, transitions."""

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from scipy.special import logsumexp

from regimes.inference.models import Model
from regimes.theory.regimes import REGIMES


@dataclass(frozen=True, slots=True)
class Posterior:
    """One model, its evidence and draws of its parameters.

    Parameters
    ----------
    model : Model
    log_evidence : float
    draws : (n_draw, size) float array
        May be empty for a model that was screened out.
    """

    model: Model
    log_evidence: float
    draws: np.ndarray


@dataclass(frozen=True, slots=True)
class Transition:
    """Where one regime gives way to another, over all sequences that hold this transition.

    Parameters
    ----------
    lower, upper : str
        Regimes below and above.
    probability : float
        Summed over sequences.
    draws : (n,) float array [m]
        Transition separations.
    """

    lower: str
    upper: str
    probability: float
    draws: np.ndarray


def probabilities(posteriors) -> np.ndarray:
    """Probability of each model, all equally probable beforehand; (n_model,), sums to one."""
    log_z = np.array([p.log_evidence for p in posteriors])
    return np.exp(log_z - logsumexp(log_z))


def mixing_weights(posteriors) -> np.ndarray:
    """Probabilities to draw from, zero for models that were screened out as negligible."""
    weight = probabilities(posteriors) * np.array([len(p.draws) > 0 for p in posteriors])
    return weight / weight.sum()


def piece_at(model: Model, draws, separation):
    """Index of the kernel piece that holds at each separation: (n_draw, n_separation) int."""
    moves = np.asarray(draws)[:, 1 + model.n_free :]
    return np.sum(np.log(separation)[None, :, None] >= moves[:, None, :], axis=2)


def regime_probability(posteriors, separation) -> dict[str, np.ndarray]:
    """Probability of each named regime at each separation [m], summed over sequences."""
    out = {name: np.zeros(len(separation)) for name in REGIMES}
    for weight, post in zip(probabilities(posteriors), posteriors, strict=True):
        if not len(post.draws):
            continue
        piece = piece_at(post.model, post.draws, separation)
        for i, name in enumerate(post.model.pieces):
            out[name] += weight * np.mean(piece == i, axis=0)
    total = sum(out.values())
    return {name: value / total for name, value in out.items()}


def mixed_slopes(posteriors, separation, size: int, rng: np.random.Generator):
    """Local spectral slope of draws from all free-exponent kernels together.

    Parameters
    ----------
    posteriors : sequence of Posterior
        Free-exponent kernels.
    separation : (n,) float array [m]
    size : int
        Number of draws.
    rng : numpy Generator

    Returns
    -------
    slope : (size, n) float array
        alpha as fitted: values at or beyond 1 and 3 stand for the saturated kernel exponents 1 and 2;
        NaN where the kernel is diffusive.
    """
    count = rng.multinomial(size, mixing_weights(posteriors))
    rows = []
    for n, post in zip(count, posteriors, strict=True):
        if n == 0:
            continue
        chosen = post.draws[rng.integers(len(post.draws), size=n)]
        piece = piece_at(post.model, chosen, separation)
        rows.append(np.take_along_axis(_piece_slopes(post.model, chosen), piece, axis=1))
    return np.concatenate(rows)


def _piece_slopes(model: Model, draws):
    """alpha of each piece, (n_draw, n_piece); NaN for a diffusive one."""
    out = np.empty((len(draws), len(model.pieces)))
    column = 1
    for i, name in enumerate(model.pieces):
        if name == "free":
            out[:, i] = draws[:, column]
            column += 1
        else:
            a = REGIMES[name].exponent
            out[:, i] = 2.0 * a - 1.0 if a >= 1.0 else np.nan
    return out


def local_exponents(slopes):
    """Kernel exponents of `mixed_slopes`: saturated at 1 and 2, zero where diffusive."""
    return np.where(np.isnan(slopes), 0.0, np.clip((slopes + 1.0) / 2.0, 1.0, 2.0))


def range_slopes(slopes):
    """alpha over a whole range for each draw: mean over its separations that are not diffusive.

    Parameters
    ----------
    slopes : (n_draw, n) float array
        `mixed_slopes` at separations evenly spaced in ln r.

    Returns
    -------
    (n_draw,) float array
        NaN where more than half of the range is diffusive.
    """
    defined = ~np.isnan(slopes)
    count = defined.sum(axis=1)
    total = np.where(defined, slopes, 0.0).sum(axis=1)
    enough = 2 * count >= slopes.shape[1]
    return np.where(enough, total / np.maximum(count, 1), np.nan)


def transitions(posteriors) -> tuple[Transition, ...]:
    """All transitions between named regimes, the most probable first; draws in proportion to the sequences' weight."""
    found: dict[tuple[str, str], list] = {}
    for weight, post in zip(probabilities(posteriors), posteriors, strict=True):
        if not len(post.draws) or not weight > 0:
            continue
        moves = np.exp(post.draws[:, 1 + post.model.n_free :])
        steps = tuple(pairwise(post.model.pieces))
        for pair in dict.fromkeys(steps):  # a sequence may hold the same transition twice
            columns = [i for i, step in enumerate(steps) if step == pair]
            found.setdefault(pair, []).append((float(weight), moves[:, columns].ravel()))
    out = []
    for (lower, upper), parts in found.items():
        each = min(len(draws) / weight for weight, draws in parts)
        draws = np.concatenate([_thinned(draws, round(each * weight)) for weight, draws in parts])
        out.append(Transition(lower, upper, sum(weight for weight, _ in parts), draws))
    return tuple(sorted(out, key=lambda t: -t.probability))


def _thinned(draws, size: int):
    """So many draws, evenly taken from all."""
    return draws[np.arange(size) * len(draws) // max(size, 1)]
