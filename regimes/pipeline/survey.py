"""What a case holds before any fit: read, cleaned, counted."""

from dataclasses import dataclass

from regimes.cases import Case, PairRules
from regimes.errors import DataError
from regimes.fixes import Fixes, read_fixes
from regimes.pairs import Pairs, find_pairs
from regimes.tracks import Tracks, make_tracks


@dataclass(frozen=True, slots=True)
class Survey:
    """What a case holds before any fit.

    Parameters
    ----------
    fixes : Fixes
    tracks : Tracks
    pairs : Pairs or None
        None where there is no pair to compare.
    no_pair : str
        Why there is none; empty where there are pairs.
    kind : str
    max_separation : float [m]
    """

    fixes: Fixes
    tracks: Tracks
    pairs: Pairs | None
    no_pair: str
    kind: str
    max_separation: float

    def summary(self) -> str:
        """A few lines: fixes, cleaning, tracks, pairs."""
        lines = [f"{len(self.fixes.time)} fixes of {len(self.fixes.labels)} particles from {self.fixes.source.path}"]
        lines += [f"  {c.reason}: {c.count} ({c.note})" for c in self.fixes.cleaning]
        pairs = f"no pair, single particles only: {self.no_pair}" if self.pairs is None else self.pairs.summary()
        return "\n".join([*lines, self.tracks.summary(), pairs])


def check(case: Case) -> Survey:
    """Read, clean and count; no fit.

    Raises
    ------
    CaseError, DataError
        As `read_fixes` and `make_tracks` do.
    """
    fixes, tracks = read_tracks(case)
    return Survey(fixes, tracks, *pairs_of(case, tracks), case.pairs.kind, case.pairs.max_separation)


def read_tracks(case: Case) -> tuple[Fixes, Tracks]:
    """Fixes of a case and the tracks they make; raises as `check` does."""
    seen = case.observations
    fixes = read_fixes(seen.path, seen.columns, seen.position_error_m, seen.highest_speed_m_s)
    return fixes, make_tracks(fixes, seen.step, seen.longest_gap)


def pairs_of(case: Case, tracks: Tracks) -> tuple[Pairs | None, str]:
    """Pairs by the rules of a case, or nothing and why there is none."""
    try:
        return _find(case.pairs, tracks), ""
    except DataError as error:
        return None, str(error)


def _find(rules: PairRules, tracks: Tracks) -> Pairs:
    return find_pairs(tracks, rules.kind, rules.max_separation, rules.launched_within)
