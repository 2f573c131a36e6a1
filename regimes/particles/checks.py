"""The single-particle side held against the relative side and against a length of the flow."""

from dataclasses import dataclass

import numpy as np

from regimes.errors import DataError
from regimes.particles.estimate import Estimate

_NORMAL_95 = 1.959963984540054


@dataclass(frozen=True, slots=True)
class Ratio:
    """A ratio of two independent estimates with its 95 % interval.

    Parameters
    ----------
    name : str
        What is divided by what.
    value, low, high : float
    expected : float
        What it should be, NaN where there is no expectation.
    """

    name: str
    value: float
    low: float
    high: float
    expected: float = float("nan")

    @property
    def agrees(self) -> bool:
        """Whether the interval holds the expected value."""
        return bool(self.low <= self.expected <= self.high)

    def summary(self) -> str:
        """One line: the ratio, its interval, and what was expected."""
        text = f"{self.name}: {self.value:.3g} ({self.low:.3g} to {self.high:.3g})"
        if np.isnan(self.expected):
            return text
        return f"{text}, expected {self.expected:g}: {'agrees' if self.agrees else 'does not agree'}"


def plateau_ratio(plateau: float, plateau_error: float, diffusivity: float, diffusivity_error: float) -> Ratio:
    r"""Plateau of the relative diffusivity over twice the single-particle diffusivity; 1 is expected.

    Two particles far enough apart to move independently separate with twice the diffusivity of one. Give the mean
    over both axes, or the minor axis, the one least contaminated by a sheared mean flow.

    Parameters
    ----------
    plateau, plateau_error : float [m2/s]
        Kernel K(r) where it is flat, with its standard error: half the growth rate of the mean square separation
        of *one* component. Half the growth of both components together is twice as large: halve it first.
    diffusivity, diffusivity_error : float [m2/s]
        Single-particle diffusivity of one component, with its standard error.

    Raises
    ------
    DataError
        If a diffusivity is not positive or an error negative.
    """
    name = "plateau of the relative over twice the single-particle diffusivity"
    return _ratio(name, (plateau, plateau_error), (2.0 * diffusivity, 2.0 * diffusivity_error), 1.0)


def length_ratio(name: str, length: float, length_error: float, radius: float, radius_error: float = 0.0) -> Ratio:
    """A Lagrangian length or a transition scale over a deformation radius (or Eulerian length); no expectation.

    Parameters
    ----------
    name : str
        Name of the length.
    length, length_error, radius, radius_error : float [m]
        Values and standard errors.

    Raises
    ------
    DataError
        If a length is not positive or an error negative.
    """
    return _ratio(f"{name} over the deformation radius", (length, length_error), (radius, radius_error), float("nan"))


def standard_error(found: Estimate) -> float:
    """Standard error that the 95 % interval of an estimate stands for."""
    return (found.high - found.low) / (2.0 * _NORMAL_95)


def _ratio(name: str, above: tuple[float, float], below: tuple[float, float], expected: float) -> Ratio:
    """Quotient, with an interval that is symmetric in its logarithm."""
    values, errors = np.array([above, below], dtype=float).T
    if not (np.all(values > 0) and np.all(errors >= 0)):
        raise DataError(
            f"{name}: got values {values[0]:.4g} and {values[1]:.4g} with errors {errors[0]:.4g} and "
            f"{errors[1]:.4g}; values must be > 0 and errors >= 0; leave the ratio out where one is missing"
        )
    value = float(values[0] / values[1])
    factor = float(np.exp(_NORMAL_95 * np.hypot(*(errors / values))))
    return Ratio(name, value, value / factor, value * factor, expected)
