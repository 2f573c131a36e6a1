"""Where the numbers of a run come from: what tracks and pairs tell, and what only a case and its file know."""

import hashlib
import json
import platform
from dataclasses import replace
from importlib.metadata import version
from pathlib import Path

import numpy as np

from regimes.analysis import Provenance
from regimes.cases import Case
from regimes.fixes import Fixes
from regimes.fixes.reading import sha256_of
from regimes.pairs import CHANCE, LAUNCHED, Pairs
from regimes.tracks import Tracks, default_gap

_LIBRARIES = ("numpy", "scipy", "numba", "emcee")
_NOT_OF_A_RUN = ("sweep", "plan", "seed")  # the seed stands beside the hash, for it may come from elsewhere


def versions() -> dict[str, str]:
    """Of this package, Python and the libraries that the numbers depend on."""
    found = {"regimes": version("regimes"), "python": platform.python_version()}
    return found | {name: version(name) for name in _LIBRARIES}


def provenance(tracks: Tracks, pairs: Pairs | None, seed: int) -> Provenance:
    """What can be said of the input without its file; `pairs` is None where there is none."""
    nothing = float("nan")
    found = Provenance(
        case="in memory",
        seed=seed,
        versions=versions(),
        source="memory",
        sha256="",
        n_fixes=int(np.sum(~np.isnan(tracks.position[:, 0]))),
        n_particles=tracks.n_track,
        n_pairs=0,
        n_clusters=0,
        kind="none",
        step=float(tracks.step),
        longest_gap=nothing,
        position_error=float(tracks.position_error),
        max_separation=nothing,
        median_start=nothing,
        start_p90=nothing,
        median_duration=nothing,
        cleaning=(),
    )
    return found if pairs is None else _with_pairs(found, tracks, pairs)


def case_sha256(case: Case) -> str:
    """Hash of everything in a case that a run depends on, but for the fixes themselves.

    Folders do not count, nor do the sections `sweep` and `plan`, which a run does not read; of a mean flow the content
    of its file counts.
    """
    content = case.model_dump(mode="json", exclude=set(_NOT_OF_A_RUN))
    content["observations"]["path"] = Path(case.observations.path).name
    if case.single.mean_flow is not None:
        content["single"]["mean_flow"] = sha256_of(Path(case.single.mean_flow))
    return hashlib.sha256(json.dumps(content, sort_keys=True).encode()).hexdigest()


def of_case(found: Provenance, case: Case, fixes: Fixes, tracks: Tracks) -> Provenance:
    """The same with what only the case and the file know."""
    gap = case.observations.longest_gap
    return replace(
        found,
        case=case.name,
        case_sha256=case_sha256(case),
        source=Path(fixes.source.path).name,
        sha256=fixes.source.sha256 or "",
        n_fixes=len(fixes.time),
        longest_gap=default_gap(fixes, tracks.step) if gap is None else gap,
        max_separation=case.pairs.max_separation,
        cleaning=tuple((c.reason, c.count, c.note) for c in fixes.cleaning),
    )


def _with_pairs(found: Provenance, tracks: Tracks, pairs: Pairs) -> Provenance:
    return replace(
        found,
        n_particles=int(np.union1d(pairs.first, pairs.second).size),
        n_pairs=pairs.n_pair,
        n_clusters=int(pairs.n_cluster),
        kind=_kind_of(pairs),
        max_separation=float(pairs.start_separation.max()),
        median_start=float(np.median(pairs.start_separation)),
        start_p90=float(np.quantile(pairs.start_separation, 0.9)),
        median_duration=float(np.median(pairs.length - 1) * tracks.step),
    )


def _kind_of(pairs: Pairs) -> str:
    launched, chance = np.any(pairs.kind == LAUNCHED), np.any(pairs.kind == CHANCE)
    return "both" if launched and chance else "launched" if launched else "chance"
