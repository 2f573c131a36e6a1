"""Rows as they stand in a file, in any order, brought to common columns but not yet cleaned."""

from dataclasses import dataclass

import numpy as np
import pandas as pd

from regimes.errors import DataError


@dataclass(frozen=True, slots=True)
class Rows:
    """Uncleaned fixes.

    Parameters
    ----------
    particle : (n,) int array
        Codes into `labels`, -1 where missing.
    labels : tuple of str
        Particle names in sorted order.
    time : (n,) float array [s]
        Seconds since 1970 UTC; NaN where missing, infinite where absurd.
    position : (n, 2) float array
        Longitude and latitude in degrees, or x and y in metres; NaN where missing.
    planar : bool
        True for x and y.
    release : (n,) int array
        Codes into `release_labels`, -1 where missing.
    release_labels : tuple of str
        Release names in sorted order.
    resolution : float
        Coarsest rounding of the stored positions, in their unit; 0 for double precision.
    """

    particle: np.ndarray
    labels: tuple[str, ...]
    time: np.ndarray
    position: np.ndarray
    planar: bool
    release: np.ndarray
    release_labels: tuple[str, ...]
    resolution: float


def rows_from(particle, time, position, release, planar: bool) -> Rows:
    """Rows from raw columns of equal length.

    Parameters
    ----------
    particle, release : (n,) Series or array
        Names as text, bytes or numbers; `release` may be None.
    time : (n,) float array [s]
    position : pair of (n,) float arrays
        Longitude and latitude, or x and y.
    planar : bool

    Returns
    -------
    Rows
    """
    codes, labels = coded(particle)
    if release is None:
        release_codes, release_labels = np.full(len(codes), -1), ()
    else:
        release_codes, release_labels = coded(release)
    return Rows(
        particle=codes,
        labels=labels,
        time=np.asarray(time, dtype=float),
        position=np.column_stack([np.asarray(column, dtype=float) for column in position]),
        planar=planar,
        release=release_codes,
        release_labels=release_labels,
        resolution=max(_resolution(np.asarray(column)) for column in position),
    )


def coded(values) -> tuple[np.ndarray, tuple[str, ...]]:
    """Codes (-1 where missing) and names, whole numbers in numerical order, all others in order of text."""
    codes, unique = pd.factorize(values)
    names = [_name(value) for value in unique]
    kept = sorted({name for name in names if name}, key=_natural)
    number = {name: code for code, name in enumerate(kept)}
    table = np.array([number.get(name, -1) for name in names] + [-1], dtype=np.int64)
    return table[codes], tuple(kept)


def _name(value) -> str:
    """A name as text: 7.0 is 7, padding of fixed-width text goes."""
    if isinstance(value, bytes):
        value = value.decode("utf-8", errors="replace")
    if isinstance(value, (float, np.floating)):
        value = int(value) if float(value).is_integer() else value
    return str(value).strip("\0 \t")


def _natural(name: str) -> tuple[int, int, str]:
    whole = name.isdecimal() and name.isascii()
    return (0, int(name), name) if whole else (1, 0, name)


def _resolution(values: np.ndarray) -> float:
    """Spacing of single-precision numbers at the largest value; 0 for doubles."""
    if values.dtype != np.float32:
        return 0.0
    known = np.abs(values[np.isfinite(values)])
    return float(np.spacing(known.max())) if known.size else 0.0


def numbers_of(values: pd.Series, name: str) -> np.ndarray:
    """A column of numbers; text that is no number becomes NaN.

    Raises
    ------
    DataError
        If most of the values that are given are no numbers.
    """
    if pd.api.types.is_numeric_dtype(values) and not pd.api.types.is_bool_dtype(values):
        single = values.dtype == np.float32
        return values.to_numpy(dtype=np.float32 if single else float, na_value=np.nan)
    numbers = pd.to_numeric(values, errors="coerce")
    given = values.notna()
    unread = given & numbers.isna()
    if unread.sum() > given.sum() / 2:
        raise DataError(
            f"column {name}: {unread.sum()} of {given.sum()} values are no numbers, such as "
            f'"{values[unread].iloc[0]}"; must be decimal numbers with a point'
        )
    return numbers.to_numpy(dtype=float, na_value=np.nan)
