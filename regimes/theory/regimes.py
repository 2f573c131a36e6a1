"""The four named regimes and the free power law: the one registry of kernel pieces."""

from dataclasses import dataclass

import numpy as np

_PROPER = {"richardson": "Richardson"}


@dataclass(frozen=True, slots=True)
class Regime:
    """One power-law piece of the separation kernel, K(r) ~ r^a.

    Parameters
    ----------
    name : str
        Word used in case files and reports.
    letter : str
        One letter, for compact sequences.
    exponent : float
        Kernel exponent a; NaN for the free piece.
    expected : str
        When the regime is expected.
    source : str
        Where the law comes from.
    """

    name: str
    letter: str
    exponent: float
    expected: str
    source: str

    @property
    def word(self) -> str:
        """The name as it stands in a sentence."""
        return _PROPER.get(self.name, self.name)

    @property
    def free(self) -> bool:
        """Whether the exponent is a parameter of the fit."""
        return bool(np.isnan(self.exponent))


REGIMES = {
    regime.name: regime
    for regime in (
        Regime(
            "ballistic",
            "B",
            1.0,
            "relative velocity that does not depend on separation: uncorrelated but persistent motion, "
            "strong shear, spectra of slope 1 or flatter",
            "Bennett (1984) J. Atmos. Sci. 41, 1881, limit of a flat spectrum",
        ),
        Regime(
            "exponential",
            "E",
            2.0,
            "nonlocal stirring by eddies larger than the separation, spectra of slope 3 or steeper",
            "Lin (1972) J. Atmos. Sci. 29, 394; Lundgren (1981) J. Fluid Mech. 111, 27",
        ),
        Regime(
            "richardson",
            "R",
            4.0 / 3.0,
            "local stirring by eddies of the size of the separation, spectral slope 5/3",
            "Richardson (1926) Proc. R. Soc. A 110, 709",
        ),
        Regime(
            "diffusive",
            "D",
            0.0,
            "separations beyond the largest eddies: the members move independently",
            "Taylor (1921) Proc. London Math. Soc. s2-20, 196",
        ),
    )
}

FREE = Regime(
    "free",
    "F",
    float("nan"),
    "any spectral slope between 1 and 3; the kernel exponent saturates beyond",
    "Bennett (1984) J. Atmos. Sci. 41, 1881: a = (alpha + 1) / 2",
)


def kernel_exponent(spectral_slope):
    r"""Kernel exponent of a wavenumber spectrum E(k) ~ k^-alpha.

    .. math:: a = (\alpha + 1) / 2, \quad 1 \le a \le 2

    Parameters
    ----------
    spectral_slope : float array of any shape
        alpha, positive for a falling spectrum.

    Returns
    -------
    float array of the same shape
        a, saturated at 1 (alpha <= 1) and 2 (alpha >= 3).

    References
    ----------
    Bennett (1984) J. Atmos. Sci. 41, 1881; Babiano et al. (1990) J. Fluid Mech. 214, 535.
    """
    return np.clip((np.asarray(spectral_slope, float) + 1.0) / 2.0, 1.0, 2.0)


def spectral_slope(exponent):
    r"""Slope of the spectrum that a kernel exponent implies, within 1 < a < 2 only.

    .. math:: \alpha = 2 a - 1

    Parameters
    ----------
    exponent : float array of any shape
        Kernel exponent a.

    Returns
    -------
    float array of the same shape
        alpha; 3 at a = 2 stands for "3 or steeper", 1 at a = 1 for "1 or flatter"; NaN for a < 1, which
        implies no spectrum, and for a > 2.
    """
    a = np.asarray(exponent, float)
    return np.where((a >= 1.0) & (a <= 2.0), 2.0 * a - 1.0, np.nan)
