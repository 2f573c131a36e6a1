"""The recipe of a synthetic survey: which world, what is released where, and how it is observed."""

import tomllib
from collections.abc import Mapping
from datetime import UTC, datetime
from pathlib import Path
from typing import Annotated, Any

from pydantic import Field, ValidationError, model_validator

from regimes.cases.problems import describe, headed
from regimes.errors import CaseError
from regimes.synthetic.contaminations import EQUATORIAL, Convergence, Faults, Instruments, Oscillation, Shear
from regimes.synthetic.sections import NotNegative, Positive, Section, Share, Text, Vector, rule
from regimes.synthetic.worlds import FourierWorld, KernelWorld, ShearDiffusionWorld


class Releases(Section):
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


class Records(Section):
    """How the particles are observed."""

    duration_d: Positive
    fix_interval_h: Positive
    position_error_m: NotNegative = 0.0
    loss_per_d: NotNegative = 0.0
    gap_probability: Share = 0.0
    gap_h: Positive = 6.0
    error_tail: Annotated[float, Field(gt=2)] | None = None
    error_memory_h: NotNegative = 0.0
    loss_per_d_apart: NotNegative | None = None
    apart_km: Positive | None = None

    @model_validator(mode="after")
    def _possible(self) -> "Records":
        if self.n_fix < 2:
            raise rule(f"{self.duration_d:g} d at {self.fix_interval_h:g} h", "give two fixes at least")
        if (self.loss_per_d_apart is None) != (self.apart_km is None):
            raise rule("one of loss_per_d_apart and apart_km", "give both, or none")
        return self

    @property
    def n_fix(self) -> int:
        """Fixes of a complete record."""
        return int(self.duration_d * 24.0 / self.fix_interval_h * (1.0 + 1e-12)) + 1


class Place(Section):
    """Where: a point on the globe, or a plane; how far releases lie apart, and how all of them drift."""

    longitude: Annotated[float, Field(ge=-180, lt=180)] | None = None
    latitude: Annotated[float, Field(ge=-89, le=89)] | None = None
    spread_km: NotNegative = 0.0
    drift_m_s: Vector = (0.0, 0.0)
    wandering_m2_s: NotNegative = 0.0
    eddy_speed_m_s: NotNegative | None = None
    eddy_time_d: Positive | None = None

    @model_validator(mode="after")
    def _both_or_none(self) -> "Place":
        if (self.longitude is None) != (self.latitude is None):
            raise rule("one of longitude and latitude", "give both, or none for a plane")
        if (self.eddy_speed_m_s is None) != (self.eddy_time_d is None):
            raise rule("one of eddy_speed_m_s and eddy_time_d", "give both, or none")
        return self

    @property
    def planar(self) -> bool:
        """True without longitude and latitude."""
        return self.longitude is None


class Recipe(Section):
    """A synthetic survey: a `kernel`, a `fourier` or a `shear_diffusion` world, and what is added to its motion."""

    name: Text
    seed: Annotated[int, Field(ge=0)]
    kernel: KernelWorld | None = None
    fourier: FourierWorld | None = None
    shear_diffusion: ShearDiffusionWorld | None = None
    releases: Releases
    records: Records
    place: Place = Place()
    oscillation: Oscillation | None = None
    shear: Shear | None = None
    convergence: Convergence | None = None
    instruments: Instruments | None = None
    faults: Faults | None = None

    @model_validator(mode="after")
    def _one_world(self) -> "Recipe":
        given = sum(world is not None for world in (self.kernel, self.fourier, self.shear_diffusion))
        if given != 1:
            got = "none" if given == 0 else f"{given}"
            raise rule(f"{got} of [kernel], [fourier] and [shear_diffusion]", "give one world")
        return self

    @model_validator(mode="after")
    def _a_period(self) -> "Recipe":
        latitude = self.place.latitude
        if self.oscillation is None or self.oscillation.period_h is not None:
            return self
        if latitude is None:
            raise rule("[oscillation] on a plane without period_h", "give period_h, or longitude and latitude")
        if abs(latitude) < EQUATORIAL:
            raise rule(
                f"[oscillation] without period_h at latitude {latitude:g}",
                f"give period_h within {EQUATORIAL:g} degrees of the equator",
            )
        return self

    @model_validator(mode="after")
    def _enough_particles(self) -> "Recipe":
        if self.faults is None:
            return self
        releases, particles = self.releases.number, self.releases.number * self.releases.particles
        if self.faults.lashed > releases:
            raise rule(f"[faults] with lashed = {self.faults.lashed}", f"be {releases}, the releases, at most")
        if self.faults.grounded + self.faults.picked_up > particles:
            both = f"{self.faults.grounded} + {self.faults.picked_up}"
            raise rule(f"[faults] with grounded + picked_up = {both}", f"be {particles}, the particles, at most")
        return self

    @property
    def world(self) -> KernelWorld | FourierWorld | ShearDiffusionWorld:
        """The one world that is given."""
        return self.kernel or self.fourier or self.shear_diffusion


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
