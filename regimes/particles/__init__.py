"""Particles taken one by one: velocities, their memory, and how far particles go alone."""

from regimes.particles.checks import Ratio, length_ratio, plateau_ratio, standard_error
from regimes.particles.dispersion import AbsoluteDispersion, absolute_dispersion, exponential_dispersion
from regimes.particles.estimate import Estimate
from regimes.particles.mean_flow import MeanFlow
from regimes.particles.record import SingleParticle
from regimes.particles.single import single_particle
from regimes.particles.velocities import Velocities, eddy_velocities

__all__ = [
    "AbsoluteDispersion",
    "Estimate",
    "MeanFlow",
    "Ratio",
    "SingleParticle",
    "Velocities",
    "absolute_dispersion",
    "eddy_velocities",
    "exponential_dispersion",
    "length_ratio",
    "plateau_ratio",
    "single_particle",
    "standard_error",
]
