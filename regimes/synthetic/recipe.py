"""The recipe of a synthetic survey: which world, what is released where, and how it is observed."""

import tomllib
from collections.abc import Mapping
from datetime import UTC, datetime
from itertools import pairwise
from pathlib import Path
from typing import Annotated, Any, Literal

import numpy as np
from pydantic import BaseModel, ConfigDict, Field, ValidationError, model_validator
from pydantic_core import PydanticCustomError

from regimes.cases.problems import describe, headed
from regimes.errors import CaseError
from regimes.synthetic.spectrum import Spectrum
from regimes.theory.kernel import Kernel
from regimes.theory.regimes import REGIMES
from regimes.units import DAY, KM

Positive = Annotated[float, Field(gt=0)]
NotNegative = Annotated[float, Field(ge=0)]
Share = Annotated[float, Field(ge=0, le=1)]
Text = Annotated[str, Field(min_length=1)]
Numbers = Annotated[tuple[float, ...], Field(strict=False)]
Lengths = Annotated[tuple[Positive, ...], Field(strict=False)]
Vector = Annotated[tuple[float, float], Field(strict=False)]
RegimeName = Literal["ballistic", "exponential", "richardson", "diffusive"]


def _rule(got: object, must: str) -> PydanticCustomError:
    return PydanticCustomError("rule", "got {got}; must {must}", {"got": str(got), "must": must})


class _Section(BaseModel):
    model_config = ConfigDict(frozen=True, extra="forbid", strict=True, allow_inf_nan=False)


def _check_pieces(n_piece: int, key: str, ends: tuple[float, ...]) -> None:
    if n_piece != len(ends) + 1:
        raise _rule(f"{n_piece} pieces", f"be one more than {key}, which has {len(ends)}")
    if any(low >= high for low, high in pairwise(ends)):
        raise _rule(list(ends), f"rise ({key})")


class KernelWorld(_Section):
    """A flow without memory whose pairs separate by a kernel; named `regimes` or free `exponents`."""

    regimes: Annotated[tuple[RegimeName, ...], Field(strict=False)] = ()
    exponents: Annotated[tuple[Annotated[float, Field(ge=0, le=2)], ...], Field(strict=False)] = ()
    transitions_km: Lengths = ()
    rate_per_d: Positive
    reference_km: Positive

    @model_validator(mode="after")
    def _pieces(self) -> "KernelWorld":
        if bool(self.regimes) == bool(self.exponents):
            raise _rule("both or neither", "give either regimes or exponents")
        _check_pieces(len(self.regimes or self.exponents), "transitions_km", self.transitions_km)
        return self

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


class FourierWorld(_Section):
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
        _check_pieces(len(self.spectral_slopes), "break_wavelengths_km", self.break_wavelengths_km)
        ends = (self.shortest_km, *self.break_wavelengths_km, self.longest_km)
        if any(low >= high for low, high in pairwise(ends)):
            raise _rule(list(ends), "rise from shortest_km over break_wavelengths_km to longest_km")
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


class Releases(_Section):
    """What is released: groups at the corners of regular polygons, one group after the other."""

    number: Annotated[int, Field(ge=1)]
    particles: Annotated[int, Field(ge=2, le=10)]
    start_separation_km: Positive
    first: datetime
    interval_h: NotNegative = 24.0

    @property
    def first_time(self) -> float:
        """Time of the first release, seconds since 1970-01-01; without a zone it is UTC."""
        return (self.first if self.first.tzinfo else self.first.replace(tzinfo=UTC)).timestamp()


class Records(_Section):
    """How the particles are observed."""

    duration_d: Positive
    fix_interval_h: Positive
    position_error_m: NotNegative = 0.0
    loss_per_d: NotNegative = 0.0
    gap_probability: Share = 0.0
    gap_h: Positive = 6.0

    @model_validator(mode="after")
    def _two_fixes(self) -> "Records":
        if self.n_fix < 2:
            raise _rule(f"{self.duration_d:g} d at {self.fix_interval_h:g} h", "give two fixes at least")
        return self

    @property
    def n_fix(self) -> int:
        """Fixes of a complete record."""
        return int(self.duration_d * 24.0 / self.fix_interval_h * (1.0 + 1e-12)) + 1


class Place(_Section):
    """Where: a point on the globe, or a plane; how far releases lie apart, and how all of them drift."""

    longitude: Annotated[float, Field(ge=-180, lt=180)] | None = None
    latitude: Annotated[float, Field(ge=-89, le=89)] | None = None
    spread_km: NotNegative = 0.0
    drift_m_s: Vector = (0.0, 0.0)
    wandering_m2_s: NotNegative = 0.0

    @model_validator(mode="after")
    def _both_or_none(self) -> "Place":
        if (self.longitude is None) != (self.latitude is None):
            raise _rule("one of longitude and latitude", "give both, or none for a plane")
        return self

    @property
    def planar(self) -> bool:
        """True without longitude and latitude."""
        return self.longitude is None


class Recipe(_Section):
    """A synthetic survey: either a `kernel` or a `fourier` world."""

    name: Text
    seed: Annotated[int, Field(ge=0)]
    kernel: KernelWorld | None = None
    fourier: FourierWorld | None = None
    releases: Releases
    records: Records
    place: Place = Place()

    @model_validator(mode="after")
    def _one_world(self) -> "Recipe":
        if (self.kernel is None) == (self.fourier is None):
            raise _rule("both or neither of [kernel] and [fourier]", "give one world")
        return self

    @property
    def world(self) -> KernelWorld | FourierWorld:
        """The one world that is given."""
        return self.kernel or self.fourier


def load_recipe(path: str | Path) -> Recipe:
    """Read a recipe (TOML).

    Raises
    ------
    CaseError
        If the file cannot be read, is no TOML, or asks for what is not possible; all problems at once.
    """
    path = Path(path)
    try:
        content = tomllib.loads(path.read_text(encoding="utf-8-sig"))
    except FileNotFoundError:
        raise CaseError(f"{path}: no such file; give the path of a recipe") from None
    except (OSError, UnicodeDecodeError) as error:
        raise CaseError(f"{path}: cannot be read ({error}); must be a text file in UTF-8") from error
    except tomllib.TOMLDecodeError as error:
        raise CaseError(f"{path}: no valid TOML: {error}; correct the line") from error
    return recipe_from(content, str(path))


def recipe_from(content: Mapping[str, Any], source: str = "recipe") -> Recipe:
    """Check the content of a recipe.

    Raises
    ------
    CaseError
        If there is any problem; all of them at once.
    """
    try:
        return Recipe.model_validate(dict(content))
    except ValidationError as error:
        raise CaseError(headed(source, describe(error, Recipe))) from None
