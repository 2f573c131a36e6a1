"""The case file: what to read, which pairs to compare, which models to weigh. Checked once, at the door."""

from regimes.cases.load import case_from, load_case
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

__all__ = [
    "REGIMES",
    "Case",
    "Columns",
    "CurveRules",
    "ModelRules",
    "Observations",
    "PairRules",
    "ReportRules",
    "SingleRules",
    "case_from",
    "load_case",
]
