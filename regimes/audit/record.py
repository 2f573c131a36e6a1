"""One threat to a verdict, sized on the data at hand: the record that every module of the audit returns."""

from regimes.verdict.finding import THREATS, Finding

__all__ = ["THREATS", "Finding"]
