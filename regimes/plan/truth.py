"""The kernels that campaigns are made of: one that is given, or draws from the posterior of data."""

from dataclasses import dataclass

import numpy as np

from regimes.cases.kernel import KernelRules
from regimes.errors import CaseError, DataError
from regimes.fitting.quick import QuickFit
from regimes.inference.fit import exit_rate_space
from regimes.inference.models import Space
from regimes.inference.predict import mixed_kernels
from regimes.plan.aim import Target, is_true
from regimes.synthetic.worlds import KernelWorld
from regimes.theory.kernel import Kernel
from regimes.units import KM

LEAST = 0.02  # posterior probability of the aimed-at regime below which nothing is planned on it
_DRAWS = 1000  # to measure it with
_ATTEMPTS = 2000  # for one kernel; fails in one of 10^17 plans at the least probability
_STREAM = 3


@dataclass(frozen=True, slots=True)
class Truth:
    """What is known of the kernel.

    Parameters
    ----------
    given : Kernel or None
        None where kernels are drawn.
    fit : QuickFit or None
        Of the data to draw from.
    target : Target
        Of whose regime every kernel is over half of its range or more.
    seed : int
    probability : float
        That the aimed-at regime holds, by the data; 1 for a given kernel.
    """

    given: Kernel | None
    fit: QuickFit | None
    target: Target
    seed: int
    probability: float

    def kernel(self, number: int) -> Kernel:
        """The kernel of campaign `number`, the same for every design."""
        if self.given is not None:
            return self.given
        rng, space = np.random.default_rng([self.seed, _STREAM, number]), _space(self.fit)
        for _ in range(_ATTEMPTS):
            (kernel,) = mixed_kernels(self.fit.named, space, 1, rng)
            if is_true(kernel, self.target):
                return kernel
        raise DataError(_improbable(self.target, self.probability))


def given_truth(rules: KernelRules, target: Target, seed: int) -> Truth:
    """The kernel of a plan.

    Raises
    ------
    CaseError
        If it is not of the aimed-at regime over half of the range.
    """
    kernel = KernelWorld.model_validate(rules.model_dump()).kernel
    if not is_true(kernel, target):
        raise CaseError(
            f'plan.aim.regime: got "{target.regime}", which [plan.kernel] is not over half of {_range(target)} and '
            "over a factor 3; must be true there, for what is not true cannot be shown; change the regime, its range, "
            "or the kernel"
        )
    return Truth(kernel, None, target, seed, 1.0)


def drawn_truth(fit: QuickFit, target: Target, seed: int) -> Truth:
    """Kernels from the named sequences of a fit, given that the aimed-at regime holds.

    Raises
    ------
    DataError
        If that is all but excluded by the data.
    """
    rng = np.random.default_rng([seed, _STREAM])
    kernels = mixed_kernels(fit.named, _space(fit), _DRAWS, rng)
    share = float(np.mean([is_true(kernel, target) for kernel in kernels]))
    if share < LEAST:
        raise DataError(_improbable(target, share))
    return Truth(None, fit, target, seed, share)


def _space(fit: QuickFit) -> Space:
    return exit_rate_space(fit.rates.likelihood)


def _improbable(target: Target, share: float) -> str:
    return (
        f"plan: the data leave a probability of {share:.2g} to {target.regime} separation over half of "
        f"{_range(target)}; need {LEAST:g}; aim at another regime or range, or give [plan.kernel]"
    )


def _range(target: Target) -> str:
    return f"{target.low / KM:.3g} to {target.high / KM:.3g} km"
