"""A separation kernel as a file gives it: in recipes and in plans."""

from itertools import pairwise
from typing import Annotated, Literal, get_args

from pydantic import Field, model_validator

from regimes.cases.section import Positive, Section, rule

Regime = Literal["ballistic", "exponential", "richardson", "diffusive"]
REGIMES: tuple[Regime, ...] = get_args(Regime)


def check_pieces(n_piece: int, key: str, ends: tuple[float, ...]) -> None:
    """Refuse pieces that are not one more than their ends, and ends that do not rise; for validators."""
    if n_piece != len(ends) + 1:
        raise rule(f"{n_piece} pieces", f"be one more than {key}, which has {len(ends)}")
    if any(low >= high for low, high in pairwise(ends)):
        raise rule(str(list(ends)), f"rise ({key})")


class KernelRules(Section):
    """A kernel in pieces, named `regimes` or free `exponents`; `rate_per_d` is 2 K / r^2 at the reference."""

    regimes: Annotated[tuple[Regime, ...], Field(strict=False)] = ()
    exponents: Annotated[tuple[Annotated[float, Field(ge=0, le=2)], ...], Field(strict=False)] = ()
    transitions_km: Annotated[tuple[Positive, ...], Field(strict=False)] = ()
    rate_per_d: Positive
    reference_km: Positive

    @model_validator(mode="after")
    def _pieces(self) -> "KernelRules":
        if bool(self.regimes) == bool(self.exponents):
            raise rule("both or neither", "give either regimes or exponents")
        check_pieces(len(self.regimes or self.exponents), "transitions_km", self.transitions_km)
        return self
