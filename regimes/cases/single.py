"""Section of the case file on particles taken one by one."""

from typing import Literal, get_args

from pydantic import model_validator

from regimes.cases.problems import show
from regimes.cases.section import Positive, Section, Text, rule
from regimes.units import DAY, KM

Mean = Literal["record", "none", "lowpass", "grid"]
MEANS: tuple[Mean, ...] = get_args(Mean)
_NEEDS = {"lowpass": "lowpass_d", "grid": "mean_flow"}


class SingleRules(Section):
    """What is removed from the velocities of single particles, and a length to hold theirs against."""

    mean: Mean = "record"
    lowpass_d: Positive | None = None
    mean_flow: Text | None = None
    deformation_radius_km: Positive | None = None

    @model_validator(mode="after")
    def _what_the_mean_needs(self) -> "SingleRules":
        given = {"lowpass_d": self.lowpass_d, "mean_flow": self.mean_flow}
        for mean, key in _NEEDS.items():
            if self.mean == mean and given[key] is None:
                raise rule(f"mean = {show(mean)} without {key}", f"give {key} too")
            if self.mean != mean and given[key] is not None:
                raise rule(f"{key} with mean = {show(self.mean)}", f"go without, or set mean = {show(mean)}")
        return self

    @property
    def period(self) -> float | None:
        """Cut-off period of the slow part [s], None for other means."""
        return None if self.lowpass_d is None else self.lowpass_d * DAY

    @property
    def deformation_radius(self) -> float | None:
        """Deformation radius [m], None where none was given."""
        return None if self.deformation_radius_km is None else self.deformation_radius_km * KM
