"""What all sections of a recipe share: the kinds of their values, and words for rules they break."""

from typing import Annotated

from pydantic import BaseModel, ConfigDict, Field
from pydantic_core import PydanticCustomError

Positive = Annotated[float, Field(gt=0)]
NotNegative = Annotated[float, Field(ge=0)]
Share = Annotated[float, Field(ge=0, le=1)]
Text = Annotated[str, Field(min_length=1)]
Numbers = Annotated[tuple[float, ...], Field(strict=False)]
Lengths = Annotated[tuple[Positive, ...], Field(strict=False)]
Vector = Annotated[tuple[float, float], Field(strict=False)]


def rule(got: object, must: str) -> PydanticCustomError:
    """The problem of a value that breaks a rule: what was got, and what it must do."""
    return PydanticCustomError("rule", "got {got}; must {must}", {"got": str(got), "must": must})


class Section(BaseModel):
    """A table of a recipe: known keys only, of exactly the type asked for."""

    model_config = ConfigDict(frozen=True, extra="forbid", strict=True, allow_inf_nan=False)
