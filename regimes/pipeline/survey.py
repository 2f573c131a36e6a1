"""What a case holds before any fit: read, cleaned, counted."""

from dataclasses import dataclass

from regimes.cases import Case
from regimes.fixes import Fixes, read_fixes
from regimes.pairs import Pairs, find_pairs
from regimes.tracks import Tracks, make_tracks


@dataclass(frozen=True, slots=True)
class Survey:
    """What a case holds before any fit."""

    fixes: Fixes
    tracks: Tracks
    pairs: Pairs
    kind: str
    max_separation: float

    def summary(self) -> str:
        """A few lines: fixes, cleaning, tracks, pairs."""
        lines = [f"{len(self.fixes.time)} fixes of {len(self.fixes.labels)} particles from {self.fixes.source.path}"]
        lines += [f"  {c.reason}: {c.count} ({c.note})" for c in self.fixes.cleaning]
        return "\n".join([*lines, self.tracks.summary(), self.pairs.summary()])


def check(case: Case) -> Survey:
    """Read, clean and count; no fit.

    Raises
    ------
    CaseError, DataError
        As `read_fixes`, `make_tracks` and `find_pairs` do.
    """
    seen = case.observations
    fixes = read_fixes(seen.path, seen.columns, seen.position_error_m, seen.highest_speed_m_s)
    tracks = make_tracks(fixes, seen.step, seen.longest_gap)
    rules = case.pairs
    pairs = find_pairs(tracks, rules.kind, rules.max_separation, rules.launched_within)
    return Survey(fixes, tracks, pairs, rules.kind, rules.max_separation)
