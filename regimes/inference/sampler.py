"""The only module that knows the sampler: emcee's affine-invariant ensemble."""

from dataclasses import dataclass

import emcee
import numpy as np

from regimes.inference.health import LEAST_LENGTHS, Health, judge


@dataclass(frozen=True, slots=True)
class Chain:
    """Draws of one model.

    Parameters
    ----------
    draws : (n_walker, n_step, size) float array
        After burn-in, unthinned.
    log_posterior : (n_walker, n_step) float array
    health : Health
    """

    draws: np.ndarray
    log_posterior: np.ndarray
    health: Health


def sample(log_posterior, start, seed: int, block: int = 600, longest: int = 12000) -> Chain:
    """Sample until the chain is healthy or as long as it may get.

    Parameters
    ----------
    log_posterior : callable
        From (m, size) parameters to (m,) values; -inf outside the prior.
    start : (n_walker, size) float array
        Starting places with finite posterior, all different, drawn from about the posterior.
    seed : int
    block, longest : int
        Steps before the first look at the convergence, and the most steps after burn-in.

    Returns
    -------
    Chain
        Its `health` says whether it converged; never raises for want of convergence.
    """
    walkers, size = start.shape
    moves = [
        (emcee.moves.DEMove(), 0.7),
        (emcee.moves.DEMove(gamma0=1.0), 0.1),  # whole differences jump between modes
        (emcee.moves.DESnookerMove(), 0.1),
        (emcee.moves.StretchMove(), 0.1),
    ]
    sampler = emcee.EnsembleSampler(walkers, size, log_posterior, moves=moves, vectorize=True)
    sampler.random_state = np.random.RandomState(seed % 2**32).get_state()
    state = sampler.run_mcmc(start, block // 3)
    sampler.reset()
    wanted = block
    while True:
        state = sampler.run_mcmc(state, wanted)
        draws = sampler.get_chain()
        tau = emcee.autocorr.integrated_time(draws, tol=0, quiet=True)
        health = judge(np.swapaxes(draws, 0, 1), tau)
        length = draws.shape[0]
        if health.ok or length >= longest:
            break
        lacking = 1.15 * LEAST_LENGTHS * float(np.max(tau)) - length if np.all(np.isfinite(tau)) else block
        wanted = int(min(max(lacking, block // 2), longest - length))
    return Chain(np.swapaxes(draws, 0, 1), sampler.get_log_prob().T, health)
