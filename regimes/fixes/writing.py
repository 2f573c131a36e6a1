"""Writing fixes as a table, with the same bytes for the same fixes."""

import gzip
from pathlib import Path

import numpy as np
import pandas as pd

from regimes.errors import CaseError
from regimes.fixes.record import Fixes

_ENDINGS = (".csv", ".csv.gz", ".parquet")
_DEGREE_DIGITS, _METRE_DIGITS = 6, 2


def write_fixes(fixes: Fixes, path: str | Path) -> None:
    """Write fixes as a table that `read_fixes` reads.

    Parameters
    ----------
    fixes : Fixes
        Positions are rounded to 1e-6 degrees or 0.01 m, times to a millisecond.
    path : str or Path
        Ending in .csv, .csv.gz or .parquet. Columns: particle, time (ISO, Z), longitude and latitude or x_m
        and y_m, and release where known.

    Raises
    ------
    CaseError
        If the ending is another.
    """
    path = Path(path)
    name = path.name.lower()
    if name.endswith(".parquet"):
        _frame(fixes).to_parquet(path, index=False)
    elif name.endswith((".csv", ".csv.gz")):
        digits = _METRE_DIGITS if fixes.planar else _DEGREE_DIGITS
        text = _frame(fixes).to_csv(index=False, float_format=f"%.{digits}f", lineterminator="\n").encode()
        if name.endswith(".gz"):
            # Neither the time nor the file's name may enter the header: same fixes, same bytes.
            text = gzip.compress(text, mtime=0)
        path.write_bytes(text)
    else:
        raise CaseError(f"{path}: cannot write this ending; known: {', '.join(_ENDINGS)}")


def _frame(fixes: Fixes) -> pd.DataFrame:
    names = ("x_m", "y_m") if fixes.planar else ("longitude", "latitude")
    rounded = np.round(fixes.position, _METRE_DIGITS if fixes.planar else _DEGREE_DIGITS)
    milliseconds = np.round(fixes.time * 1e3).astype("datetime64[ms]")
    whole = not np.any(milliseconds.astype(np.int64) % 1000)
    stamps = np.datetime_as_string(milliseconds, unit="s" if whole else "ms")
    columns = {
        "particle": np.array(fixes.labels, dtype=object)[fixes.particle],
        "time": np.char.add(stamps, "Z").astype(object),
        names[0]: rounded[:, 0] + 0.0,  # no negative zero
        names[1]: rounded[:, 1] + 0.0,
    }
    if fixes.release_labels:
        releases = np.array([*fixes.release_labels, None], dtype=object)
        columns["release"] = releases[fixes.release][fixes.particle]
    return pd.DataFrame(columns)
