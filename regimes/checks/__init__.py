"""Does one kernel answer for every curve? Posterior predictive checks of the curves that no fit has seen."""

from regimes.checks.causes import usual_cause
from regimes.checks.predictive import predictive_checks
from regimes.checks.record import DISSENT, Check
from regimes.checks.structure import structure_check

__all__ = ["DISSENT", "Check", "predictive_checks", "structure_check", "usual_cause"]
