"""Planning a survey: which design would show what is aimed at, by simulated campaigns of known truth."""

from regimes.plan.aim import Target, target_of
from regimes.plan.design import points_of
from regimes.plan.progress import FILE, Progress, progress_key
from regimes.plan.record import Plan
from regimes.plan.run import simulate_plan
from regimes.plan.summary import Summary
from regimes.plan.truth import Truth, drawn_truth, given_truth

__all__ = [
    "FILE",
    "Plan",
    "Progress",
    "Summary",
    "Target",
    "Truth",
    "drawn_truth",
    "given_truth",
    "points_of",
    "progress_key",
    "simulate_plan",
    "target_of",
]
