"""Rows from tables: data frames, CSV, Parquet."""

import gzip
from collections.abc import Iterable
from difflib import get_close_matches
from pathlib import Path

import pandas as pd
import pyarrow.dataset

from regimes.cases import Columns
from regimes.errors import DataError
from regimes.fixes.rows import Rows, numbers_of, rows_from
from regimes.fixes.times import seconds_of

_MISSING = ["", "NA", "N/A", "NaN", "nan", "NAN", "null", "NULL", "None", "-"]
_SEPARATORS = ",;\t|"


def rows_of_frame(frame: pd.DataFrame, columns: Columns) -> Rows:
    """Rows of a data frame with named columns.

    Parameters
    ----------
    frame : DataFrame
    columns : Columns

    Returns
    -------
    Rows

    Raises
    ------
    DataError
        If a column is missing, or its content is not what it should be.
    """
    check_names(columns, frame.columns, "column")
    return rows_from(
        particle=frame[columns.particle],
        time=seconds_of(frame[columns.time], columns.time),
        position=[numbers_of(frame[name], name) for name in columns.position],
        release=None if columns.release is None else frame[columns.release],
        planar=columns.planar,
    )


def wanted(columns: Columns) -> list[str]:
    """Names of the columns to read."""
    return [name for name in columns.model_dump().values() if name is not None]


def check_names(columns: Columns, known: Iterable[str], word: str) -> None:
    """Raise DataError if a name is not among those that exist, with all that exist."""
    known = [str(name) for name in known]
    missing = [name for name in wanted(columns) if name not in known]
    if not missing:
        return
    lower = {name.lower(): name for name in known}
    close = [lower[hit] for name in missing for hit in get_close_matches(name.lower(), lower, n=1)]
    listed = ", ".join(known[:30]) + (", ..." if len(known) > 30 else "")
    hint = f"; did you mean {', '.join(dict.fromkeys(close))}?" if close else ""
    raise DataError(f"no {word} named {', '.join(missing)}; there are {listed or 'none'}{hint}")


def read_csv(path: Path, columns: Columns) -> Rows:
    """Rows of a text table with a header, plain or gzipped; comma, semicolon, tab, bar or blank between."""
    skipped, separator = _layout(path)
    options = {"sep": separator, "skiprows": skipped, "encoding": "utf-8-sig", "skipinitialspace": True}
    header = [str(name) for name in pd.read_csv(path, nrows=0, index_col=False, **options).columns]
    check_names(columns, [name.strip() for name in header], "column")
    raw = {name.strip(): name for name in header}
    text = [raw[name] for name in (columns.particle, columns.release) if name is not None]
    frame = pd.read_csv(
        path,
        usecols=[raw[name] for name in wanted(columns)],
        dtype=dict.fromkeys(text, str),
        keep_default_na=False,
        na_values={name: [""] if name in text else _MISSING for name in header},
        index_col=False,
        low_memory=False,
        **options,
    )
    return rows_of_frame(frame.rename(columns=str.strip), columns)


def _layout(path: Path) -> tuple[int, str]:
    """Lines before the header (comments and blanks), and the separator of the header."""
    opener = gzip.open if path.suffix.lower() == ".gz" else open
    with opener(path, "rt", encoding="utf-8-sig") as lines:
        for skipped, line in enumerate(lines):
            if not line.strip() or line.startswith("#"):
                continue
            separator = max(_SEPARATORS, key=line.count)
            return skipped, separator if separator in line else r"\s+"
    raise DataError(f"{path}: no header line; must be a table with named columns")


def read_parquet(path: Path, columns: Columns) -> Rows:
    """Rows of a Parquet file, or of a folder of them."""
    table = pyarrow.dataset.dataset(path, format="parquet")
    check_names(columns, table.schema.names, "column")
    return rows_of_frame(table.to_table(columns=wanted(columns)).to_pandas(ignore_metadata=True), columns)
