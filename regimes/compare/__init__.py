"""Two data sets held against one another, the larger sampled as the smaller one was."""

from regimes.compare.common import Side, side_of
from regimes.compare.files import check_comparison_folder, write_comparison
from regimes.compare.matching import Near
from regimes.compare.record import Comparison
from regimes.compare.run import CompareOptions, compare
from regimes.compare.sides import compare_sides

__all__ = [
    "CompareOptions",
    "Comparison",
    "Near",
    "Side",
    "check_comparison_folder",
    "compare",
    "compare_sides",
    "side_of",
    "write_comparison",
]
