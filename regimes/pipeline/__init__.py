"""The walk from fixes to verdict, whole or step by step."""

from regimes.fitting.options import Options, SingleOptions
from regimes.fitting.quick import QuickFit, quick_fit
from regimes.pipeline.planning import plan_survey
from regimes.pipeline.run import analyse, analyse_pairs, audit_case, options_of
from regimes.pipeline.singles import analyse_singles
from regimes.pipeline.survey import Survey, check

__all__ = [
    "Options",
    "QuickFit",
    "SingleOptions",
    "Survey",
    "analyse",
    "analyse_pairs",
    "analyse_singles",
    "audit_case",
    "check",
    "options_of",
    "plan_survey",
    "quick_fit",
]
