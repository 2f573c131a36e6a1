"""The case file: what to read, which pairs to compare, which models to weigh. Checked once, at the door."""

from regimes.cases.load import case_from, load_case, variants
from regimes.cases.plan import Aim, PlanRules
from regimes.cases.planned import Planned, load_plan
from regimes.cases.record import (
    REGIMES,
    Case,
    Columns,
    CurveRules,
    ModelRules,
    Observations,
    PairRules,
    ReportRules,
)
from regimes.cases.single import SingleRules
from regimes.cases.sweep import Sweep

__all__ = [
    "REGIMES",
    "Aim",
    "Case",
    "Columns",
    "CurveRules",
    "ModelRules",
    "Observations",
    "PairRules",
    "PlanRules",
    "Planned",
    "ReportRules",
    "SingleRules",
    "Sweep",
    "case_from",
    "load_case",
    "load_plan",
    "variants",
]
