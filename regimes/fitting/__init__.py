"""Choices, exit rates and the fit by quadrature: what a run, its audit and every simulation share."""

from regimes.fitting.options import Options, SingleOptions
from regimes.fitting.quick import QuickFit, quick_fit
from regimes.fitting.rates import Rates, exit_rates, rate_table

__all__ = ["Options", "QuickFit", "Rates", "SingleOptions", "exit_rates", "quick_fit", "rate_table"]
