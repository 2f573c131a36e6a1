"""The worlds that a recipe may ask for."""

from itertools import pairwise
from typing import Annotated

import numpy as np
from pydantic import Field, model_validator

from regimes.cases.kernel import KernelRules, check_pieces
from regimes.synthetic.sections import Lengths, NotNegative, Numbers, Positive, Section, Share, rule
from regimes.synthetic.shear_diffusion import ShearDiffusion
from regimes.synthetic.spectrum import Spectrum
from regimes.theory.kernel import Kernel
from regimes.theory.regimes import REGIMES
from regimes.units import DAY, KM


class KernelWorld(KernelRules):
    """A flow without memory whose pairs separate by a kernel; named `regimes` or free `exponents`."""

    @property
    def kernel(self) -> Kernel:
        """The kernel; `rate_per_d` is 2 K / r^2 at the reference separation, the exponent there."""
        exponents = self.exponents or tuple(REGIMES[name].exponent for name in self.regimes)
        return Kernel(
            np.array(exponents),
            np.array(self.transitions_km) * KM,
            0.5 * self.rate_per_d / DAY,
            self.reference_km * KM,
        )


class FourierWorld(Section):
    """A random-Fourier flow of a spectrum, pieces from short to long waves."""

    spectral_slopes: Annotated[Numbers, Field(min_length=1)]
    break_wavelengths_km: Lengths = ()
    shortest_km: Positive
    longest_km: Positive
    speed_m_s: Positive
    divergent_fraction: Share = 0.0
    persistence: NotNegative = 1.0
    modes_per_octave: Annotated[int, Field(ge=1)] = 6

    @model_validator(mode="after")
    def _pieces(self) -> "FourierWorld":
        check_pieces(len(self.spectral_slopes), "break_wavelengths_km", self.break_wavelengths_km)
        ends = (self.shortest_km, *self.break_wavelengths_km, self.longest_km)
        if any(low >= high for low, high in pairwise(ends)):
            raise rule(list(ends), "rise from shortest_km over break_wavelengths_km to longest_km")
        return self

    @property
    def spectrum(self) -> Spectrum:
        """The spectrum."""
        return Spectrum(
            np.array(self.spectral_slopes),
            np.array(self.break_wavelengths_km) * KM,
            self.shortest_km * KM,
            self.longest_km * KM,
            self.speed_m_s,
            self.divergent_fraction,
            self.persistence,
            self.modes_per_octave,
        )


class ShearDiffusionWorld(Section):
    """A linear shear in which every particle diffuses alike; no kernel, for it has a direction."""

    diffusivity_m2_s: Positive
    rate_per_d: float
    direction_deg: float = 0.0

    @property
    def flow(self) -> ShearDiffusion:
        """The flow."""
        return ShearDiffusion(self.diffusivity_m2_s, self.rate_per_d / DAY, self.direction_deg)
