"""Both curves in one fit, tempered for what both know of the same clusters."""

from dataclasses import replace

import numpy as np

from regimes.curves.groups import place_of_rows
from regimes.errors import FitError
from regimes.fitting.rates import Rates
from regimes.inference.average import probabilities
from regimes.inference.fit import infer, screen_costly
from regimes.inference.record import Fit
from regimes.likelihood.joint import ExitRows, JointLikelihood
from regimes.likelihood.separation import SeparationLikelihood
from regimes.pairs import Pairs

WORTH = 0.01  # probability in the exit-rate fit, among its kind, below which a model is left out of the joint fit
NO_SEPARATION = "there is no fit of the separation distribution"


def joint_fit(rates: Rates, moved: Pairs, separation: SeparationLikelihood | None, leading, candidates, how):
    """The fit of exit rates and separations together, or why there is none.

    Parameters
    ----------
    rates : Rates
    moved : Pairs
        From their first passage, those of the separation counts.
    separation : SeparationLikelihood or None
        Tempered; None where it could not be fitted.
    leading : Inference
        The fit to the exit rates.
    candidates : (list of Candidate, list of Candidate)
        Named and free models, in the order of `leading`.
    how : dict
        `seed`, `jobs`, `progress`.

    Returns
    -------
    Inference or None, str

    Notes
    -----
    Models with less than 1 % of the probability of their kind in the exit-rate fit are left out: the joint likelihood
    costs as much as that of the separations.
    """
    if separation is None:
        return None, NO_SEPARATION
    likelihood = joint_likelihood(rates, moved, separation)
    groups = [_worth(*group) for group in zip(candidates, (leading.named, leading.free), strict=True)]
    try:
        everyone = [c for group in groups for c in group]
        screened, tempered = screen_costly("joint", likelihood, everyone, how["seed"], how["progress"])
        count = len(groups[0])
        return infer("joint", screened[:count], screened[count:], 1.0 / tempered.tempering, **how), ""
    except FitError as error:
        return None, str(error)


def joint_likelihood(rates: Rates, moved: Pairs, separation: SeparationLikelihood) -> JointLikelihood:
    """Likelihood of both curves, not yet tempered for what they share."""
    cut = rates.resolved.intervals
    share = 1.0 / rates.scatter[cut]
    everything = rates.everything
    rows = ExitRows(rates.credited[:, cut] * share, everything.time_at_risk[:, cut] * share, everything.weight)
    return JointLikelihood(rates.likelihood, separation, rows, place_of_rows(moved, rates.pairs))


def _worth(candidates, fits: tuple[Fit, ...]):
    """Candidates that matter to the exit rates, with draws of that fit to start from."""
    share = probabilities([f.posterior for f in fits])
    out = []
    for candidate, fit, p in zip(candidates, fits, share, strict=True):
        if fit.sampled and p >= WORTH:
            draws = fit.posterior.draws
            chosen = np.linspace(0, len(draws) - 1, 400).astype(int)
            out.append(replace(candidate, draws=draws[chosen]))
    return out
