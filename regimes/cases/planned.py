"""Reading a plan: from a case with data, or from a file that has only the plan."""

from pathlib import Path
from typing import Annotated

from pydantic import Field, ValidationError

from regimes.cases.load import case_from, read_toml
from regimes.cases.plan import PlanRules
from regimes.cases.problems import describe, headed
from regimes.cases.record import Case, CurveRules, ModelRules
from regimes.cases.section import Section, Text
from regimes.errors import CaseError

_KERNEL = "plan.kernel: missing; give it, or observations and pairs of data that it can be drawn from"


class Planned(Section):
    """A plan without data."""

    name: Text
    seed: Annotated[int, Field(ge=0)]
    plan: PlanRules
    curves: CurveRules = CurveRules()
    models: ModelRules = ModelRules()


def load_plan(path: str | Path) -> tuple[Planned, Case | None]:
    """Read the plan of a case file (TOML).

    Parameters
    ----------
    path : str or Path

    Returns
    -------
    planned : Planned
    case : Case or None
        Whose data the kernel is to be drawn from; None where the plan has a kernel.

    Raises
    ------
    CaseError
        If the file cannot be read, has no plan, or has neither a kernel nor data; all problems at once.
    """
    path = Path(path)
    content = read_toml(path)
    if "observations" in content:
        case = case_from(content, str(path), path.parent)
        if case.plan is None:
            raise CaseError(headed(str(path), ["plan: missing; must be given"]))
        planned = Planned(name=case.name, seed=case.seed, plan=case.plan, curves=case.curves, models=case.models)
        return planned, case if case.plan.kernel is None else None
    try:
        planned = Planned.model_validate(content)
    except ValidationError as error:
        raise CaseError(headed(str(path), describe(error, Planned))) from None
    if planned.plan.kernel is None:
        raise CaseError(headed(str(path), [_KERNEL]))
    return planned, None
