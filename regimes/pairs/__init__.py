"""Pairs: which particles are compared, from when to when, and which are independent of one another."""

from regimes.pairs.record import CHANCE, KINDS, LAUNCHED, Pairs
from regimes.pairs.search import find_pairs

__all__ = ["CHANCE", "KINDS", "LAUNCHED", "Pairs", "find_pairs"]
