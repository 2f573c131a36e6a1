"""What single particles say, with everything it was made from."""

from dataclasses import dataclass
from html import escape

import numpy as np

from regimes.particles.dispersion import AbsoluteDispersion, ballistic_limit, diffusive_limit
from regimes.particles.estimate import Estimate
from regimes.particles.scales import METHODS, Correlation, Levelling, Scale
from regimes.particles.tensor import DiffusivityTensor
from regimes.units import DAY, KM

METHOD_WORDS = {"long_window": "long window", "first_zero": "first zero crossing", "decaying_cosine": "decaying cosine"}
MEAN_WORDS = {
    "none": "no mean removed",
    "record": "mean of each record removed",
    "lowpass": "slow part of each record removed",
    "grid": "mean flow on a grid removed",
}


@dataclass(frozen=True, slots=True)
class SingleParticle:
    """Scales, diffusivity and dispersion of single particles.

    Parameters
    ----------
    dispersion : AbsoluteDispersion
    correlation : Correlation
    velocity : Estimate [m/s]
        u', root mean square eddy velocity of one component.
    scales : tuple of Scale
        One for each of `METHODS`.
    diffusivity : DiffusivityTensor
    levelling : Levelling
        Whether the running integral of the correlation levels off.
    window : float [s]
        Longest lag used.
    mean : str
        What was removed: none, record, lowpass or grid.
    n_particle, n_unit : int
        Tracks used and the independent units (releases or particles) they make.
    n_short : int
        Tracks left out as shorter than a third of the typical one.
    n_lost : int
        Velocities left out because their mean is unknown.
    cautions : tuple of str
        What a reader should know.
    """

    dispersion: AbsoluteDispersion
    correlation: Correlation
    velocity: Estimate
    scales: tuple[Scale, ...]
    diffusivity: DiffusivityTensor
    levelling: Levelling
    window: float
    mean: str
    n_particle: int
    n_unit: int
    n_short: int
    n_lost: int
    cautions: tuple[str, ...]

    @property
    def converges(self) -> bool:
        """Whether the running integral of the correlation levels off."""
        return self.levelling.converges

    def scale(self, method: str = "decaying_cosine") -> Scale:
        """Integral time and length by one of `METHODS`."""
        return self.scales[METHODS.index(method)]

    def ballistic_limit(self, time: np.ndarray) -> np.ndarray:
        """Taylor's early limit of the total absolute dispersion, 2 u'^2 t^2 for two components [m2]."""
        return 2.0 * ballistic_limit(time, self.velocity.value**2)

    def diffusive_limit(self, time: np.ndarray) -> np.ndarray:
        """Taylor's late limit of the total absolute dispersion, 4 kappa t for two components [m2]."""
        return 2.0 * diffusive_limit(time, 1.0, self.diffusivity.mean.value)

    def numbers(self) -> dict[str, object]:
        """Integral times [d], lengths [km] and diffusivities [m2/s] with intervals, and whether they converge."""
        tensor = self.diffusivity
        return {
            "integral_time_d": {s.method: s.time.scaled(1.0 / DAY).as_numbers() for s in self.scales},
            "integral_length_km": {s.method: s.length.scaled(1.0 / KM).as_numbers() for s in self.scales},
            "diffusivity_m2_s": {name: getattr(tensor, name).as_numbers() for name in ("major", "minor", "mean")},
            "converges": self.converges,
        }

    def summary(self) -> str:
        """A few lines: numbers with their 95 % intervals, and what to be careful about."""
        head = f"{self.n_particle} particles in {self.n_unit} independent units, {MEAN_WORDS[self.mean]}"
        lines = [f"{head}, lags to {self.window / DAY:.3g} d"]
        lines += [f"  {name}: {text}" for name, text in self._rows()]
        if self.n_short:
            lines.append(f"  {self.n_short} tracks left out as too short")
        if self.n_lost:
            lines.append(f"  {self.n_lost} velocities left out, their mean is unknown")
        return "\n".join(lines + [f"  caution: {text}" for text in self.cautions])

    def _rows(self) -> list[tuple[str, str]]:
        tensor = self.diffusivity
        rows = [("rms velocity of one component", self.velocity.text("m/s"))]
        for scale in self.scales:
            words = METHOD_WORDS[scale.method]
            rows.append((f"integral time, {words}", scale.time.scaled(1.0 / DAY).text("d")))
            rows.append((f"integral length, {words}", scale.length.scaled(1.0 / KM).text("km")))
        rows += [(f"diffusivity, {name}", getattr(tensor, name).text("m2/s")) for name in ("mean", "major", "minor")]
        rows.append(("major axis, counterclockwise from east", tensor.angle.text("degrees")))
        rows.append(("running integral levels off", "yes" if self.converges else f"no: {self.levelling.reason}"))
        return rows

    def _repr_html_(self) -> str:
        body = "".join(f"<tr><td>{escape(name)}</td><td>{escape(text)}</td></tr>" for name, text in self._rows())
        notes = "".join(f"<p>Caution: {escape(text)}.</p>" for text in self.cautions)
        return f"<table>{body}</table>{notes}"
