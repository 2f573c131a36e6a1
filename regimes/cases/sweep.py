"""Section of the case file that runs it several times, with other choices each time."""

from itertools import product
from typing import Annotated, Any

from pydantic import Field, model_validator

from regimes.cases.problems import show
from regimes.cases.section import Section, rule

MOST = 64  # variants of one case; more is a wish that no one reads the pages of
_FIXED = ("observations.path", "observations.columns", "single.mean_flow")

Choices = Annotated[dict[str, Annotated[tuple[Any, ...], Field(strict=False)]], Field(default_factory=dict)]


class Sweep(Section):
    """Lists of values for keys of the other sections; every combination is one variant."""

    observations: Choices
    pairs: Choices
    curves: Choices
    models: Choices
    single: Choices
    report: Choices

    @model_validator(mode="after")
    def _readable(self) -> "Sweep":
        for key, values in self.choices.items():
            if key in _FIXED:
                raise rule(key, "name no file; write a case for each")
            if not values or any(values.count(v) > 1 for v in values):
                raise rule(f"{key} = {show(values)}", "be a list of different values")
        if not 1 <= self.size <= MOST:
            raise rule(f"{self.size} combinations", f"be 1 to {MOST}")
        return self

    @property
    def choices(self) -> dict[str, tuple[Any, ...]]:
        """Values by ``section.key``."""
        return {
            f"{section}.{key}": values
            for section in type(self).model_fields
            for key, values in getattr(self, section).items()
        }

    @property
    def size(self) -> int:
        """Number of combinations; 0 where nothing is listed."""
        if not self.choices:
            return 0
        size = 1
        for values in self.choices.values():
            size *= len(values)
        return size

    def combinations(self) -> list[dict[str, Any]]:
        """Every combination as values by ``section.key``, the last key changing fastest."""
        keys = list(self.choices)
        return [dict(zip(keys, values, strict=True)) for values in product(*self.choices.values())]


def label_of(combination: dict[str, Any]) -> str:
    """A combination in words: ``separation_ratio 1.2, max_separation_km 1``."""
    return ", ".join(f"{key.split('.')[1]} {_short(value)}" for key, value in combination.items())


def _short(value: Any) -> str:
    if isinstance(value, (list, tuple)):
        joint = "+" if any(isinstance(part, str) for part in value) else " to "
        return joint.join(_short(part) for part in value)
    return f"{value:.6g}" if isinstance(value, float) else str(value).lower()
