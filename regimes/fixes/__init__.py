"""Fixes: position fixes of any accepted form, with the impossible rejected and everything dropped counted."""

from regimes.cases import Columns
from regimes.fixes.reading import fixes_from_frame, read_fixes
from regimes.fixes.record import Cleaning, Fixes, Source
from regimes.fixes.writing import write_fixes

__all__ = ["Cleaning", "Columns", "Fixes", "Source", "fixes_from_frame", "read_fixes", "write_fixes"]
