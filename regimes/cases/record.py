"""The case: frozen models of the sections of a case file."""

from typing import Annotated, Literal

from pydantic import Field, ValidationInfo, field_validator, model_validator

from regimes.cases.kernel import REGIMES, Regime
from regimes.cases.plan import PlanRules
from regimes.cases.problems import show
from regimes.cases.section import Positive, Range, Section, Text, rule
from regimes.cases.single import SingleRules
from regimes.cases.sweep import Sweep
from regimes.units import HOUR, KM


def _rising(limits: tuple[float, float] | None) -> tuple[float, float] | None:
    if limits is not None and limits[0] >= limits[1]:
        raise rule(show(limits), "rise")
    return limits


def _metres(limits: tuple[float, float] | None) -> tuple[float, float] | None:
    return None if limits is None else (limits[0] * KM, limits[1] * KM)


class Columns(Section):
    """Names of the columns (or variables) that hold the fixes.

    Either `longitude` and `latitude` [degrees], or `x` and `y` [m]; `release` is optional.
    """

    particle: Text
    time: Text
    longitude: Text | None = None
    latitude: Text | None = None
    x: Text | None = None
    y: Text | None = None
    release: Text | None = None

    @model_validator(mode="after")
    def _one_kind_of_position(self) -> "Columns":
        given = [key for key in ("longitude", "latitude", "x", "y") if getattr(self, key) is not None]
        if given not in (["longitude", "latitude"], ["x", "y"]):
            raise rule(", ".join(given) or "no position", "name longitude and latitude, or x and y")
        names = [name for name in self.model_dump().values() if name is not None]
        twice = sorted({name for name in names if names.count(name) > 1})
        if twice:
            raise rule(", ".join(twice) + " more than once", "name a different column for each")
        return self

    @property
    def planar(self) -> bool:
        """True for x and y."""
        return self.x is not None

    @property
    def position(self) -> tuple[str, str]:
        """Names of the two position columns, longitude or x first."""
        pair = (self.x, self.y) if self.planar else (self.longitude, self.latitude)
        return tuple(name for name in pair if name is not None)


class Observations(Section):
    """Where the fixes are and how good they are."""

    path: Text
    columns: Columns
    position_error_m: Annotated[float, Field(ge=0)]
    step_h: Positive | None = None
    longest_gap_h: Positive | None = None
    highest_speed_m_s: Positive | None = None

    @field_validator("longest_gap_h")
    @classmethod
    def _no_shorter_than_step(cls, gap: float | None, info: ValidationInfo) -> float | None:
        step = info.data.get("step_h")
        if gap is not None and step is not None and gap < step:
            raise rule(show(gap), f"be at least step_h ({step:g})")
        return gap

    @property
    def step(self) -> float | None:
        """Interval of the common time axis [s], None for the default."""
        return None if self.step_h is None else self.step_h * HOUR

    @property
    def longest_gap(self) -> float | None:
        """Longest gap to bridge [s], None for the default."""
        return None if self.longest_gap_h is None else self.longest_gap_h * HOUR


class PairRules(Section):
    """Which pairs to compare."""

    max_separation_km: Positive
    kind: Literal["launched", "chance", "both"] = "launched"
    launched_within_h: Annotated[float, Field(ge=0)] = 6.0

    @property
    def max_separation(self) -> float:
        """Largest start separation [m]."""
        return self.max_separation_km * KM

    @property
    def launched_within(self) -> float:
        """Launch window [s]."""
        return self.launched_within_h * HOUR


class CurveRules(Section):
    """Separations at which the curves are taken, and how they are checked."""

    separation_ratio: Annotated[float, Field(gt=1.05, le=3.0)] = 2.0**0.5
    separations_km: Range | None = None
    repetitions: Annotated[int, Field(ge=199)] = 199
    triplets: bool = True

    @field_validator("separations_km")
    @classmethod
    def _one_step_at_least(cls, limits: tuple[float, float] | None, info: ValidationInfo):
        ratio = info.data.get("separation_ratio")
        if _rising(limits) is not None and ratio is not None and limits[1] < limits[0] * ratio:
            raise rule(show(limits), f"span at least one separation_ratio ({ratio:g})")
        return limits

    @property
    def separations(self) -> tuple[float, float] | None:
        """Range of separations [m], None for all that is resolved."""
        return _metres(self.separations_km)


class ModelRules(Section):
    """Regimes that compete, and how many transitions between them."""

    regimes: Annotated[tuple[Regime, ...], Field(strict=False)] = REGIMES
    most_transitions: Annotated[int, Field(ge=0, le=3)] = 2

    @field_validator("regimes")
    @classmethod
    def _each_once(cls, regimes: tuple[Regime, ...]) -> tuple[Regime, ...]:
        if not regimes:
            raise rule("[]", "name one regime at least")
        if len(set(regimes)) < len(regimes):
            raise rule(show(regimes), "name each regime once")
        return regimes


class ReportRules(Section):
    """What else the report shows."""

    slope_range_km: Range | None = None

    @field_validator("slope_range_km")
    @classmethod
    def _rises(cls, limits: tuple[float, float] | None) -> tuple[float, float] | None:
        return _rising(limits)

    @property
    def slope_range(self) -> tuple[float, float] | None:
        """Range of separations over which a slope is quoted [m]."""
        return _metres(self.slope_range_km)


class Case(Section):
    """One case: observations in, verdict out."""

    name: Text
    seed: Annotated[int, Field(ge=0)]
    observations: Observations
    pairs: PairRules
    curves: CurveRules = CurveRules()
    models: ModelRules = ModelRules()
    single: SingleRules = SingleRules()
    report: ReportRules = ReportRules()
    sweep: Sweep | None = None
    plan: PlanRules | None = None
