"""Separation statistics of a single power-law kernel, in closed form (two dimensions by default)."""

import numpy as np
from scipy.special import gammainc, gammaln, hyp1f1, ive


def moment(order, time, coefficient, exponent, start=0.0, dimension=2):
    r"""Moment <r^n> of separations under K = A r^a, a < 2.

    .. math:: \langle r^n \rangle = (q^2 A t)^{n/q} \frac{\Gamma((n+d)/q)}{\Gamma(d/q)}
              \, {}_1F_1(-n/q; d/q; -r_0^q / (q^2 A t)), \quad q = 2 - a

    Parameters
    ----------
    order : float
        n.
    time : float array [s]
        t > 0.
    coefficient : float [m^(2 - a) / s]
        A.
    exponent : float
        a < 2.
    start : float [m]
        r_0; zero is the self-similar solution.
    dimension : int
        d.

    Returns
    -------
    float array [m^n]

    References
    ----------
    LaCasce (2010) J. Mar. Res. 68, 433; derived from the Bessel form of the density.
    """
    q = 2.0 - exponent
    scale = q * q * coefficient * np.asarray(time, float)
    head = scale ** (order / q) * np.exp(gammaln((order + dimension) / q) - gammaln(dimension / q))
    return head * hyp1f1(-order / q, dimension / q, -(start**q) / scale)


def kurtosis(exponent, dimension=2):
    r"""Kurtosis <r^4> / <r^2>^2 of the self-similar solution under K ~ r^a, a < 2.

    .. math:: \Gamma((4+d)/q) \Gamma(d/q) / \Gamma((2+d)/q)^2
    """
    q = 2.0 - exponent
    return np.exp(gammaln((4 + dimension) / q) + gammaln(dimension / q) - 2.0 * gammaln((2 + dimension) / q))


def cumulative(separation, time, coefficient, exponent, dimension=2):
    r"""Share of pairs closer than `separation`, self-similar solution: P(d/q, r^q / (q^2 A t)).

    Parameters
    ----------
    separation : float array [m]
    time : float [s]
    coefficient : float [m^(2 - a) / s]
    exponent : float
        a < 2.
    dimension : int

    Returns
    -------
    float array, 0 to 1
        Regularised incomplete gamma function.
    """
    q = 2.0 - exponent
    return gammainc(dimension / q, np.asarray(separation, float) ** q / (q * q * coefficient * time))


def density(separation, time, start, coefficient, exponent):
    r"""Density of separations (per length) under K = A r^a, a < 2, from a finite start, two dimensions.

    .. math:: f = \frac{u}{2t} (u/u_0)^\nu e^{-(u^2 + u_0^2)/4t} I_\nu\!\left(\frac{u u_0}{2t}\right)
              \frac{du}{dr}, \quad u = \frac{2 r^{q/2}}{q \sqrt A}, \; \nu = 2/q - 1

    Parameters
    ----------
    separation : float array [m]
    time : float [s]
    start : float [m]
    coefficient : float [m^(2 - a) / s]
    exponent : float
        a < 2.

    Returns
    -------
    float array [1/m]

    References
    ----------
    Bennett (2006) Lagrangian Fluid Dynamics; LaCasce (2010) J. Mar. Res. 68, 433.
    """
    q = 2.0 - exponent
    nu = 2.0 / q - 1.0
    r = np.asarray(separation, float)
    root = np.sqrt(coefficient)
    u, u0 = 2.0 * r ** (q / 2) / (q * root), 2.0 * start ** (q / 2) / (q * root)
    bessel = ive(nu, u * u0 / (2.0 * time)) * np.exp(-((u - u0) ** 2) / (4.0 * time))
    return u / (2.0 * time) * (u / u0) ** nu * bessel * r ** (q / 2 - 1) / root


def exponential_moment(order, time, rate, start, dimension=2):
    r"""Moment <r^n> = r_0^n exp(n (n + d) t / T) under K = r^2 / T (`rate` = 1/T in 1/s).

    References
    ----------
    Lundgren (1981) J. Fluid Mech. 111, 27.
    """
    return start**order * np.exp(order * (order + dimension) * rate * np.asarray(time, float))
