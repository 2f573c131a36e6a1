"""The separation kernel: continuous, a power law in pieces."""

from dataclasses import dataclass

import numpy as np

from regimes.errors import FitError
from regimes.theory.exit_times import mean_exit_times


@dataclass(frozen=True, slots=True)
class Kernel:
    r"""Isotropic separation kernel (relative diffusivity of the Fokker-Planck equation) K(r).

    .. math:: K(r) = K_0 (r / r_0)^{a_i} \times \text{factors that keep it continuous},
              \quad b_{i-1} \le r < b_i

    Parameters
    ----------
    exponents : (n_piece,) float array
        Kernel exponents a, from small to large separations.
    breaks : (n_piece - 1,) float array [m]
        Transition separations b, increasing.
    rate : float [1/s]
        K(r_0) / r_0^2 at the reference separation.
    reference : float [m]
        Reference separation r_0.

    Raises
    ------
    FitError
        If the shapes do not agree, breaks do not increase, a value is not finite or one but an exponent not positive.

    Notes
    -----
    The separation density obeys p_t = r^-1 d/dr( r K dp/dr ) in two dimensions, per area.

    References
    ----------
    Richardson (1926) Proc. R. Soc. A 110, 709; Bennett (1984) J. Atmos. Sci. 41, 1881.
    """

    exponents: np.ndarray
    breaks: np.ndarray
    rate: float
    reference: float

    def __post_init__(self):
        for name in ("exponents", "breaks"):
            value = np.array(getattr(self, name), float).reshape(-1)
            value.flags.writeable = False
            object.__setattr__(self, name, value)
        ok = (
            self.exponents.size == self.breaks.size + 1
            and np.all(np.diff(self.breaks) > 0)
            and np.all(self.breaks > 0)
            and self.rate > 0
            and self.reference > 0
            and np.all(np.isfinite([*self.exponents, *self.breaks, self.rate, self.reference]))
        )
        if not ok:
            raise FitError(
                f"kernel: got {self.exponents.size} exponents {self.exponents.tolist()}, breaks "
                f"{self.breaks.tolist()}, rate {self.rate}, reference {self.reference}; need one exponent more than "
                "breaks, breaks increasing, all finite, all but exponents positive; correct the numbers"
            )

    def __call__(self, separation):
        """K at each separation [m2/s]; `separation` in m, any shape."""
        r = np.asarray(separation, float)
        log_k = self._piece_constant()
        piece = np.searchsorted(self.breaks, r, side="right")
        return np.exp(log_k[piece] + self.exponents[piece] * np.log(r / self.reference))

    def exponent(self, separation):
        """Kernel exponent a = dlnK/dlnr at each separation (upper piece at a transition)."""
        return self.exponents[np.searchsorted(self.breaks, np.asarray(separation, float), side="right")]

    def exit_times(self, thresholds):
        """Mean exit time between successive thresholds [s]; see `mean_exit_times`."""
        thresholds = np.ascontiguousarray(thresholds, float)
        return mean_exit_times(thresholds, self.exponents, self.breaks, self.reference) / self.rate

    def _piece_constant(self):
        """ln K of each piece extrapolated to the reference separation."""
        jump = np.diff(self.exponents) * np.log(self.breaks / self.reference)
        raw = np.concatenate(([0.0], -np.cumsum(jump)))
        home = np.searchsorted(self.breaks, self.reference, side="right")
        return raw - raw[home] + np.log(self.rate * self.reference**2)
