"""Reading fixes: one call for every accepted form."""

import hashlib
import zlib
from collections.abc import Callable
from pathlib import Path

import pandas as pd

from regimes.cases import Columns
from regimes.errors import DataError
from regimes.fixes.cleaning import Quality, cleaned
from regimes.fixes.gridded import read_netcdf, read_zarr
from regimes.fixes.record import Fixes, Source
from regimes.fixes.rows import Rows
from regimes.fixes.tables import read_csv, read_parquet, rows_of_frame

_READERS: dict[str, tuple[str, Callable[[Path, Columns], Rows]]] = {
    ".csv": ("CSV", read_csv),
    ".csv.gz": ("gzipped CSV", read_csv),
    ".txt": ("text table", read_csv),
    ".txt.gz": ("gzipped text table", read_csv),
    ".tsv": ("text table", read_csv),
    ".parquet": ("Parquet", read_parquet),
    ".pq": ("Parquet", read_parquet),
    ".nc": ("NetCDF", read_netcdf),
    ".nc4": ("NetCDF", read_netcdf),
    ".cdf": ("NetCDF", read_netcdf),
    ".zarr": ("Zarr", read_zarr),
}
_CHUNK = 1 << 20


def read_fixes(path: str | Path, columns: Columns, position_error: float, highest_speed: float | None = None) -> Fixes:
    """Read position fixes of drifting particles.

    Parameters
    ----------
    path : str or Path
        CSV (.csv, .txt, .tsv, plain or .gz), Parquet (.parquet), NetCDF (.nc) or a Zarr folder (.zarr). In
        NetCDF and Zarr the fixes may be a CF ragged array, particle x time, or a table along one dimension.
    columns : Columns
        Names of the columns or variables.
    position_error : float [m]
        Standard error of one coordinate of one fix.
    highest_speed : float, optional [m/s]
        Fixes that need more are dropped. Default: 5, or ten times the median speed if that is more.

    Returns
    -------
    Fixes
        Sorted by particle and time. All that was found and dropped is in `Fixes.cleaning`.

    Raises
    ------
    CaseError
        If `position_error` or `highest_speed` is out of range.
    DataError
        If the file cannot be read, or its content is not what the columns say.
    """
    path = Path(path)
    quality = Quality(position_error, highest_speed)
    name, reader = _reader(path)
    try:
        rows = reader(path, columns)
        checksum = sha256_of(path)
    except DataError as error:
        raise DataError(f"{path}: {_without(str(error), path)}") from error
    except (OSError, EOFError, zlib.error, ValueError, KeyError) as error:
        reason = _first_line(error, path)
        raise DataError(f"{path}: cannot be read as {name} ({reason}); is it damaged or another format?") from error
    try:
        return cleaned(rows, quality, Source(str(path), checksum))
    except DataError as error:
        raise DataError(f"{path}: {error}") from error


def fixes_from_frame(
    frame: pd.DataFrame, columns: Columns, position_error: float, highest_speed: float | None = None
) -> Fixes:
    """Position fixes from a data frame; see `read_fixes`.

    Parameters
    ----------
    frame : DataFrame
        One row a fix. Times as dates, ISO text, or seconds since 1970-01-01 UTC.
    columns : Columns
    position_error : float [m]
    highest_speed : float, optional [m/s]

    Returns
    -------
    Fixes

    Raises
    ------
    CaseError
        If `position_error` or `highest_speed` is out of range.
    DataError
        If the content is not what the columns say.
    """
    quality = Quality(position_error, highest_speed)
    return cleaned(rows_of_frame(frame, columns), quality, Source())


def sha256_of(path: Path) -> str:
    """SHA-256 of a file, or of all files in a folder with their names and sizes, in sorted order."""
    digest = hashlib.sha256()
    files = [path] if path.is_file() else sorted(part for part in path.rglob("*") if part.is_file())
    for file in files:
        if file != path:
            digest.update(f"{file.relative_to(path).as_posix()}\0{file.stat().st_size}\0".encode())
        with file.open("rb") as content:
            while chunk := content.read(_CHUNK):
                digest.update(chunk)
    return digest.hexdigest()


def _reader(path: Path) -> tuple[str, Callable[[Path, Columns], Rows]]:
    if not path.exists():
        raise DataError(f"{path}: no such file; check observations.path")
    suffix = "".join(path.suffixes[-2:]).lower() if path.suffix.lower() == ".gz" else path.suffix.lower()
    if suffix not in _READERS:
        raise DataError(f"{path}: the ending {suffix or '(none)'} is not known; known: {', '.join(_READERS)}")
    name, reader = _READERS[suffix]
    if path.is_dir() and reader not in (read_zarr, read_parquet):
        raise DataError(f"{path}: is a folder; must be a file")
    if path.is_file() and path.stat().st_size == 0:
        raise DataError(f"{path}: the file is empty")
    return name, reader


def _first_line(error: Exception, path: Path) -> str:
    """What another library had to say, without the path and in no more than 100 characters."""
    text = (str(error).strip() or type(error).__name__).splitlines()[0].replace(str(path), "it")
    return text if len(text) <= 100 else text[:97] + "..."


def _without(text: str, path: Path) -> str:
    return text.removeprefix(f"{path}: ")
