"""What every section of a case file is made of: kinds of values, and a problem in words."""

from typing import Annotated

from pydantic import BaseModel, ConfigDict, Field
from pydantic_core import PydanticCustomError

Positive = Annotated[float, Field(gt=0)]
Text = Annotated[str, Field(min_length=1)]
Range = Annotated[tuple[Positive, Positive], Field(strict=False)]


class Section(BaseModel):
    """A frozen table of keys that takes no others, no words for numbers, no infinity."""

    model_config = ConfigDict(frozen=True, extra="forbid", strict=True, allow_inf_nan=False)


def rule(got: str, must: str) -> PydanticCustomError:
    """A problem with a value that has the right type."""
    return PydanticCustomError("rule", "got {got}; must {must}", {"got": got, "must": must})
