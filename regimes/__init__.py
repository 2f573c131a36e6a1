"""Which turbulence regime the separations of drifting instruments support, with uncertainty that holds.

Position fixes in; regimes, transition scales and spectral slope out. The walk is fixes, tracks, pairs, curves,
likelihood, inference, verdict, report; `analyse` runs it from a case file, `analyse_pairs` from pairs in memory,
and every step can be called by itself.
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from regimes.cases import Case, Columns, load_case
    from regimes.errors import CaseError, DataError, FitError, RegimesError
    from regimes.fixes import fixes_from_frame, read_fixes, write_fixes
    from regimes.pairs import find_pairs
    from regimes.pipeline import (
        Options,
        QuickFit,
        SingleOptions,
        analyse,
        analyse_pairs,
        analyse_singles,
        check,
        quick_fit,
    )
    from regimes.report import write_report
    from regimes.theory.kernel import Kernel
    from regimes.tracks import make_tracks

_HOME = {
    "regimes.cases": ("Case", "Columns", "load_case"),
    "regimes.errors": ("CaseError", "DataError", "FitError", "RegimesError"),
    "regimes.fixes": ("fixes_from_frame", "read_fixes", "write_fixes"),
    "regimes.pairs": ("find_pairs",),
    "regimes.pipeline": (
        "Options",
        "QuickFit",
        "SingleOptions",
        "analyse",
        "analyse_pairs",
        "analyse_singles",
        "check",
        "quick_fit",
    ),
    "regimes.report": ("write_report",),
    "regimes.theory.kernel": ("Kernel",),
    "regimes.tracks": ("make_tracks",),
}
_WHERE = {name: module for module, names in _HOME.items() for name in names}

__all__ = [
    "Case",
    "CaseError",
    "Columns",
    "DataError",
    "FitError",
    "Kernel",
    "Options",
    "QuickFit",
    "RegimesError",
    "SingleOptions",
    "analyse",
    "analyse_pairs",
    "analyse_singles",
    "check",
    "find_pairs",
    "fixes_from_frame",
    "load_case",
    "make_tracks",
    "quick_fit",
    "read_fixes",
    "write_fixes",
    "write_report",
]


def __getattr__(name: str) -> Any:
    """Load a public name when it is first asked for, so that the command line answers at once."""
    if name not in _WHERE:
        raise AttributeError(f"module 'regimes' has no attribute {name!r}")
    return getattr(import_module(_WHERE[name]), name)
