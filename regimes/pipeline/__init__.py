"""The walk from fixes to verdict, whole or step by step."""

from regimes.pipeline.options import Options
from regimes.pipeline.quick import QuickFit, quick_fit
from regimes.pipeline.run import analyse, analyse_pairs
from regimes.pipeline.survey import Survey, check

__all__ = ["Options", "QuickFit", "Survey", "analyse", "analyse_pairs", "check", "quick_fit"]
