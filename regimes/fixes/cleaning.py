"""From rows in any order to fixes: what cannot be used is dropped, and everything dropped is counted."""

from dataclasses import dataclass, replace

import numpy as np

from regimes.errors import CaseError, DataError
from regimes.fixes.places import checked_places
from regimes.fixes.record import Cleaning, Fixes, Source
from regimes.fixes.rows import Rows
from regimes.fixes.speeds import default_limit, distances, impossible_fixes

_MOST_BAD = 0.3  # share of the fixes beyond which they cannot be what they claim to be
_SAME_PLACE = 4.0  # position errors within which two fixes of one time are one fix
_METRES_PER_DEGREE = 111_320.0


@dataclass(frozen=True, slots=True)
class Quality:
    """What is known about the fixes: position error [m], and highest possible speed [m/s] (None: default)."""

    position_error: float
    highest_speed: float | None = None

    def __post_init__(self):
        if not (np.isfinite(self.position_error) and self.position_error >= 0):
            raise CaseError(f"observations.position_error_m: got {self.position_error!r}; must be >= 0")
        if self.highest_speed is not None and not self.highest_speed > 0:
            raise CaseError(f"observations.highest_speed_m_s: got {self.highest_speed!r}; must be > 0")


def cleaned(rows: Rows, quality: Quality, source: Source) -> Fixes:
    """Fixes from rows.

    Parameters
    ----------
    rows : Rows
    quality : Quality
    source : Source

    Returns
    -------
    Fixes
        With everything that was found in `Fixes.cleaning`, in the order of the steps: impossible positions,
        missing values and times, order of rows, repeated times, impossible speeds, particles of one fix.

    Raises
    ------
    DataError
        If nothing usable is left, or the rows cannot be what they claim to be.
    """
    if len(rows.particle) == 0:
        raise DataError("no rows: the table has a header but no fix; check the file")
    rows, found = checked_places(rows)
    found.append(_precision(rows, quality))
    for step in (_complete, _in_order):
        rows, more = step(rows)
        found += more
    rows, more = _one_place_per_time(rows, quality)
    found += more
    rows, more = _possible_speeds(rows, quality)
    found += more
    rows, more = _long_enough(rows)
    found += more
    _refuse_one_point(rows)
    release = _releases(rows)
    return Fixes(
        particle=rows.particle,
        labels=rows.labels,
        time=rows.time,
        position=rows.position,
        planar=rows.planar,
        release=release,
        release_labels=rows.release_labels,
        position_error=float(quality.position_error),
        cleaning=tuple(item for item in found if item.count),
        source=source,
    )


def _kept(rows: Rows, keep: np.ndarray) -> Rows:
    """The rows of a mask or an index array."""
    if keep.dtype == bool and keep.all():
        return rows
    return replace(
        rows,
        particle=rows.particle[keep],
        time=rows.time[keep],
        position=rows.position[keep],
        release=rows.release[keep],
    )


def _precision(rows: Rows, quality: Quality) -> Cleaning:
    """A note when the file rounds positions more coarsely than they were measured."""
    rounding = rows.resolution * (1.0 if rows.planar else _METRES_PER_DEGREE)
    coarse = rounding > max(quality.position_error, 0.01)
    note = f"positions are stored to {rounding:.2g} m, more coarsely than the position error; kept"
    return Cleaning("single precision", len(rows.particle) if coarse else 0, note)


def _complete(rows: Rows) -> tuple[Rows, list[Cleaning]]:
    absurd = np.isinf(rows.time)
    missing = (rows.particle < 0) | np.isnan(rows.time) | ~np.isfinite(rows.position).all(axis=1)
    missing &= ~absurd
    rest = _kept(rows, ~(missing | absurd))
    if len(rest.particle) == 0:
        raise DataError(
            f"not one of {len(missing)} rows has a particle, a time between 1973 and 2100 and a position; "
            "check the columns and their fill values"
        )
    return rest, [
        Cleaning("fill-value times", int(absurd.sum()), "padding, unreadable, or not in 1973 to 2100; dropped"),
        Cleaning("missing values", int(missing.sum()), "no particle, time or usable position; dropped"),
    ]


def _in_order(rows: Rows) -> tuple[Rows, list[Cleaning]]:
    """Sort by particle, time and place, so that the order of the rows never matters."""
    file_order = np.argsort(rows.particle, kind="stable")
    particle, time = rows.particle[file_order], rows.time[file_order]
    backward = int(np.sum((np.diff(time) < 0) & (particle[1:] == particle[:-1])))
    if backward or np.any(np.diff(time)[particle[1:] == particle[:-1]] == 0):
        order = np.lexsort((rows.position[:, 1], rows.position[:, 0], rows.time, rows.particle))
    else:
        order = file_order
    return _kept(rows, order), [Cleaning("rows out of time order", backward, "sorted; kept")]


def _one_place_per_time(rows: Rows, quality: Quality) -> tuple[Rows, list[Cleaning]]:
    """One fix per particle and time.

    Fixes of one time at one place are repeats, and one is kept. Where they lie further apart than their
    errors, nothing tells which is right, and an average would be a place where nobody was: all of them go.
    """
    again = np.append(False, (np.diff(rows.time) == 0) & (np.diff(rows.particle) == 0))
    if not again.any():
        return rows, []
    group = np.cumsum(~again) - 1
    leader = np.flatnonzero(~again)[group]
    apart = distances(rows.position[leader], rows.position, rows.planar)
    tolerance = max(_SAME_PLACE * quality.position_error, 0.2)
    conflict = (np.bincount(group, weights=apart > tolerance) > 0)[group]
    if conflict.mean() > _MOST_BAD:
        at = int(np.argmax(conflict))
        raise DataError(
            f"{conflict.sum()} of {len(conflict)} fixes share particle and time with another at a different "
            f"place, such as particle {rows.labels[rows.particle[at]]}; does the particle column name a "
            "single particle?"
        )
    repeat = again & ~conflict
    return _kept(rows, ~(repeat | conflict)), [
        Cleaning("duplicates", int(repeat.sum()), "same particle, time and place; one kept of each"),
        Cleaning(
            "conflicting duplicates",
            int(conflict.sum()),
            "same particle and time, places further apart than their errors: none can be trusted; dropped",
        ),
    ]


def _possible_speeds(rows: Rows, quality: Quality) -> tuple[Rows, list[Cleaning]]:
    columns = (rows.particle, rows.time, rows.position, rows.planar)
    limit = quality.highest_speed or default_limit(*columns)
    bad, jumps = impossible_fixes(*columns, limit, quality.position_error)
    if bad.mean() > _MOST_BAD:
        raise DataError(
            f"{bad.sum()} of {len(bad)} fixes need a speed above {limit:.3g} m/s; check the units of time "
            "and position, whether the particle column names a single particle, and "
            "observations.highest_speed_m_s"
        )
    return _kept(rows, ~bad), [
        Cleaning("impossible speeds", int(bad.sum()), f"need more than {limit:.3g} m/s; dropped"),
        Cleaning("jumps that persist", jumps, f"faster than {limit:.3g} m/s and never back; kept"),
    ]


def _long_enough(rows: Rows) -> tuple[Rows, list[Cleaning]]:
    """Drop particles of one fix and names without any, and number the others afresh."""
    count = np.bincount(rows.particle, minlength=len(rows.labels))
    enough = count >= 2
    single = int(np.sum(count == 1))
    if not enough.any():
        raise DataError(
            f"not one of {single} particles has two usable fixes; a track needs at least two; does the "
            "particle column name particles, not fixes?"
        )
    number = np.cumsum(enough) - 1
    rest = _kept(rows, enough[rows.particle])
    labels = tuple(label for label, keep in zip(rows.labels, enough, strict=True) if keep)
    return replace(rest, particle=number[rest.particle], labels=labels), [
        Cleaning("particles of one fix", single, "too short for a track; dropped")
    ]


def _refuse_one_point(rows: Rows) -> None:
    if np.all(rows.position == rows.position[0]):
        raise DataError(
            f"all {len(rows.particle)} fixes of all {len(rows.labels)} particles lie at one point; check the "
            "position columns"
        )


def _releases(rows: Rows) -> np.ndarray:
    """Release of each particle, -1 where no fix names one."""
    n = len(rows.labels)
    named = rows.release >= 0
    release = np.full(n, -1)
    release[rows.particle[named]] = rows.release[named]
    other = named & (rows.release != release[rows.particle])
    if other.any():
        at = int(np.argmax(other))
        code = rows.particle[at]
        both = sorted({rows.release_labels[rows.release[at]], rows.release_labels[release[code]]})
        raise DataError(
            f"particle {rows.labels[code]} has more than one release ({', '.join(both)}); a particle belongs "
            "to one release: check the release column, or give a redeployed drifter a new name"
        )
    return release
