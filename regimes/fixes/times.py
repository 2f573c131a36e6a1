"""Times of any accepted form as seconds since 1970-01-01 UTC: NaN where missing, infinite where absurd."""

import re

import numpy as np
import pandas as pd

from regimes.errors import DataError

_FILL = 1e25  # no time in any unit, but a fill value
_WHOLE_FILLS = (-2147483647, -9223372036854775806)  # default fill values of netCDF for whole numbers
EARLIEST, LATEST = 100_000_000.0, 4_102_444_800.0  # s: March 1973 and the year 2100
STANDARD_CALENDARS = ("standard", "gregorian", "proleptic_gregorian")
GREGORIAN_START = pd.Timestamp("1582-10-15", tz="UTC")
UNIT_SECONDS = {
    "days": 86400.0,
    "hours": 3600.0,
    "minutes": 60.0,
    "seconds": 1.0,
    "milliseconds": 1e-3,
    "microseconds": 1e-6,
    "nanoseconds": 1e-9,
}
_SHORT = {"d": "days", "h": "hours", "hr": "hours", "hrs": "hours", "min": "minutes", "mins": "minutes"}
_SHORT |= {"s": "seconds", "sec": "seconds", "secs": "seconds", "msec": "milliseconds", "ms": "milliseconds"}
_SHORT |= {"us": "microseconds", "ns": "nanoseconds"}
_SINCE = re.compile(r"^\s*(\w+)\s+since\s+(.+?)\s*$", re.IGNORECASE)


def seconds_of(values: pd.Series, name: str) -> np.ndarray:
    """Times in a column of a table as seconds since 1970.

    Parameters
    ----------
    values : Series
        ISO text with or without a zone (none means UTC), dates of pandas or Python, or seconds since 1970.
    name : str
        Name of the column, for messages.

    Returns
    -------
    (n,) float array [s]
        NaN where a time is missing; infinite where it cannot be read or lies outside 1973 to 2100.

    Raises
    ------
    DataError
        If most of the times cannot be read, or are absurd.
    """
    if values.dtype == object:
        values = values.infer_objects()
    if pd.api.types.is_datetime64_any_dtype(values):
        return _plausible(_epoch(values), name)
    if not pd.api.types.is_numeric_dtype(values) or pd.api.types.is_bool_dtype(values):
        return _from_text(values.where(values.isna(), values.astype(str)), name)
    seconds = values.to_numpy(dtype=float, na_value=np.nan).copy()
    return _plausible(seconds, name)


def _epoch(values: pd.Series) -> np.ndarray:
    """Dates of pandas to seconds; without a zone they are UTC."""
    if values.dt.tz is not None:
        values = values.dt.tz_convert("UTC").dt.tz_localize(None)
    stamps = values.to_numpy(dtype="datetime64[us]")
    seconds = stamps.astype(np.int64) / 1e6
    seconds[np.isnat(stamps)] = np.nan
    return seconds


def _from_text(values: pd.Series, name: str) -> np.ndarray:
    """ISO text to seconds; numbers in a column that also holds text, such as a line of units, are seconds."""
    dates = pd.to_datetime(values, utc=True, format="ISO8601", errors="coerce")
    given = values.notna()
    unread = given & dates.isna()
    if unread.any():  # "2024-05-31 18:00:00 UTC" and a zone behind a blank are common and clear
        plain = values[unread].astype(str).str.strip()
        plain = plain.str.replace(r"\s*(?:UTC|GMT)$|\s+(?=[+-]\d\d:?\d\d$)", "", regex=True)
        dates[unread] = pd.to_datetime(plain, utc=True, format="ISO8601", errors="coerce")
        unread = given & dates.isna()
    if unread.sum() > given.sum() / 2:
        numbers = pd.to_numeric(values, errors="coerce")
        if numbers.notna().sum() > given.sum() / 2:
            seconds = numbers.to_numpy(dtype=float, na_value=np.nan).copy()
            seconds[(given & numbers.isna()).to_numpy()] = np.inf
            return _plausible(seconds, name)
        raise DataError(
            f"column {name}: {unread.sum()} of {given.sum()} times cannot be read, such as "
            f'"{values[unread].iloc[0]}"; must be ISO like 2024-05-31T18:00:00Z (no zone means UTC) or '
            "seconds since 1970"
        )
    seconds = _epoch(dates)
    seconds[unread.to_numpy()] = np.inf
    return _plausible(seconds, name)


def _plausible(seconds: np.ndarray, name: str) -> np.ndarray:
    """Seconds since 1970 with absurd ones set to infinity, unless most are absurd."""
    given = np.isfinite(seconds) & (np.abs(seconds) < _FILL)
    absurd = given & ((seconds < EARLIEST) | (seconds > LATEST))
    if absurd.sum() > given.sum() / 2:
        example = float(np.median(seconds[given]))
        hint = "; these look like milliseconds" if EARLIEST * 1e3 < example < LATEST * 1e3 else ""
        raise DataError(
            f"column {name}: numbers such as {example:.10g} are no seconds since 1970 between 1973 and 2100"
            f"{hint}; give ISO times or seconds since 1970-01-01 UTC"
        )
    return np.where(np.isnan(seconds) | (given & ~absurd), seconds, np.inf)


def seconds_since(values: np.ndarray, units: str, calendar: str, name: str) -> np.ndarray:
    """Numbers with units like ``days since 1950-01-01T00:00:00Z`` as seconds since 1970.

    Parameters
    ----------
    values : array of numbers
        Undecoded times; library fill values that were never declared come out as infinite.
    units, calendar : str
        Attributes of the variable; an empty calendar is the standard one.
    name : str
        Name of the variable, for messages.

    Returns
    -------
    float array [s], shaped as `values`
        NaN where a time is missing; infinite where it lies outside 1973 to 2100.

    Raises
    ------
    DataError
        If the units or the calendar cannot be used, or most times are absurd.
    """
    if calendar.lower() not in ("", *STANDARD_CALENDARS):
        raise DataError(
            f"variable {name}: calendar {calendar!r} is not of this world's days; must be one of "
            f"{', '.join(STANDARD_CALENDARS)}; convert the times to a standard calendar first"
        )
    match = _SINCE.match(units)
    word = match.group(1).lower() if match else ""
    word = _SHORT.get(word, word if word.endswith("s") else word + "s")
    if match is None or word not in UNIT_SECONDS:
        raise DataError(
            f"variable {name}: units {units!r} cannot be read; must be like "
            f'"seconds since 1970-01-01 00:00:00", with {", ".join(UNIT_SECONDS)}'
        )
    origin = _origin(match.group(2), name)
    if origin < GREGORIAN_START and calendar.lower() != "proleptic_gregorian":
        raise DataError(
            f"variable {name}: times since {match.group(2)}, before the Gregorian calendar, are ambiguous by "
            'days; set the calendar to "proleptic_gregorian" if that is meant, or give seconds since 1970'
        )
    values = np.asarray(values)
    numbers = np.where(np.isin(values, _WHOLE_FILLS), np.inf, values.astype(float))
    return _plausible(numbers * UNIT_SECONDS[word] + origin.timestamp(), name)


def _origin(text: str, name: str) -> pd.Timestamp:
    """The date in the units; a trailing UTC, GMT, Z or +0000 is accepted, no zone means UTC."""
    plain = re.sub(r"\s*(UTC|GMT)$", "", text.strip(), flags=re.IGNORECASE)
    plain = re.sub(r"(:\d\d(?:\.\d+)?)\s+([+-]\d\d(?::?\d\d)?)$", r"\1\2", plain)
    try:
        origin = pd.Timestamp(plain)
    except ValueError:
        raise DataError(
            f"variable {name}: the date {text!r} in its units cannot be read; must be like 1970-01-01 00:00:00"
        ) from None
    return origin.tz_localize("UTC") if origin.tz is None else origin.tz_convert("UTC")
