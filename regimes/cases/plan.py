"""Section of the case file for a survey that is still to be made: designs to compare, and what they are to show."""

from typing import Annotated

from pydantic import Field, ValidationInfo, field_validator, model_validator

from regimes.cases.kernel import KernelRules, Regime
from regimes.cases.problems import show
from regimes.cases.section import Positive, Range, Section, rule
from regimes.units import DAY, HOUR, KM

MOST = 64  # design points
NotNegative = Annotated[float, Field(ge=0)]


class Aim(Section):
    """What the survey is to show: one regime over a range of separations, at all or against one other regime."""

    regime: Regime
    against: Regime | None = None
    below_km: Positive | None = None
    range_km: Range | None = None
    probability: Annotated[float, Field(gt=0, lt=1)] = 0.95

    @model_validator(mode="after")
    def _one_range_of_two_regimes(self) -> "Aim":
        if (self.below_km is None) == (self.range_km is None):
            raise rule("both or neither of below_km and range_km", "give one of them")
        if self.range_km is not None and self.range_km[0] >= self.range_km[1]:
            raise rule(show(self.range_km), "rise (range_km)")
        if self.against == self.regime:
            raise rule(f"against = {show(self.against)}", "be another regime")
        return self


class PlanRules(Section):
    """Designs to compare: every number of releases with every fix interval, all else equal."""

    releases: Annotated[tuple[Annotated[int, Field(ge=1, le=10_000)], ...], Field(strict=False)]
    particles: Annotated[int, Field(ge=2, le=4)]
    start_separation_km: Positive
    fix_interval_h: Annotated[tuple[Positive, ...], Field(strict=False)]
    position_error_m: NotNegative
    duration_d: Positive
    loss_per_d: NotNegative = 0.0
    campaigns: Annotated[int, Field(ge=10)] = 40
    aim: Aim
    kernel: KernelRules | None = None

    @field_validator("releases", "fix_interval_h")
    @classmethod
    def _rises(cls, values: tuple[float, ...]) -> tuple[float, ...]:
        if not values or list(values) != sorted(set(values)):
            raise rule(show(values), "be a list of numbers that rise")
        return values

    @field_validator("duration_d")
    @classmethod
    def _some_fixes(cls, days: float, info: ValidationInfo) -> float:
        longest = max(info.data.get("fix_interval_h", (0.0,)))
        if 24.0 * days < 10.0 * longest:
            raise rule(show(days), f"be ten times the longest fix interval ({longest:g} h) at least")
        return days

    @model_validator(mode="after")
    def _not_too_many(self) -> "PlanRules":
        points = len(self.releases) * len(self.fix_interval_h)
        if points > MOST:
            raise rule(f"{points} designs", f"be {MOST} at most")
        return self

    @property
    def start_separation(self) -> float:
        """Of particles of a release at the start [m]."""
        return self.start_separation_km * KM

    @property
    def steps(self) -> tuple[float, ...]:
        """Fix intervals [s]."""
        return tuple(hours * HOUR for hours in self.fix_interval_h)

    @property
    def duration(self) -> float:
        """Of a complete record [s]."""
        return self.duration_d * DAY

    @property
    def loss(self) -> float:
        """Rate at which particles are lost [1/s]."""
        return self.loss_per_d / DAY
