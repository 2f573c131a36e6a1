"""Rows of the page that say where the numbers come from."""

import math

from regimes.analysis import Provenance
from regimes.report.digits import count, significant
from regimes.units import DAY, HOUR, KM


def cleaning_rows(origin: Provenance) -> list[tuple[str, str, str]]:
    """What was dropped or changed: reason, count, note."""
    return [(reason, count(n), note) for reason, n, note in origin.cleaning]


def provenance_rows(origin: Provenance) -> list[tuple[str, str]]:
    """Name and value of everything known of the input, the choices and the versions."""
    gap = f"{origin.longest_gap / HOUR:g} h" if math.isfinite(origin.longest_gap) else "not recorded"
    return [
        ("case", origin.case),
        ("fixes", f"{count(origin.n_fixes)} of {count(origin.n_particles)} particles, from {origin.source}"),
        ("SHA-256 of the input", origin.sha256 or "none: the data came from memory"),
        *_pair_rows(origin),
        ("common time step", f"{origin.step / HOUR:g} h"),
        ("longest gap bridged", gap),
        ("position error", f"{origin.position_error:g} m"),
        ("random seed", str(origin.seed)),
        *((f"version of {name}", version) for name, version in origin.versions.items()),
    ]  # fmt: skip


def _pair_rows(origin: Provenance) -> list[tuple[str, str]]:
    known = math.isfinite(origin.max_separation)
    limit = f"{origin.max_separation / KM:.3g} km" if known else "not recorded"
    farthest = ("limit of the separation at the start", limit)
    if origin.n_pairs == 0:
        return [("pairs", "none"), farthest]
    start = (significant(r / KM) for r in (origin.median_start, origin.start_p90))
    return [
        ("pairs", f"{count(origin.n_pairs)}, {origin.kind}"),
        farthest,
        ("separation at the start", "median {} km, 90th percentile {} km".format(*start)),
        ("duration of the pairs", f"median {significant(origin.median_duration / DAY)} d"),
    ]
