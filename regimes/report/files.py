"""The report folder: complete or not there."""

import json
import os
import tempfile
from collections.abc import Callable
from functools import partial
from pathlib import Path

from regimes.analysis import Analysis, SinglesOnly
from regimes.errors import CaseError
from regimes.report.figures import FIGURES, draw, names_of, pdf, svg
from regimes.report.page import page
from regimes.report.posterior import write_posterior
from regimes.report.singles_page import singles_page
from regimes.report.tables import write_curves_csv, write_curves_netcdf
from regimes.report.tex import write_tex
from regimes.report.verdict_json import verdict_text

FILES = ("report.html", "verdict.json", "curves.csv", "curves.nc", "posterior.nc", "table.tex")
EARLIER_FIGURES = ("mean-log", "passage")  # drawn by versions whose reports may still be replaced
WITHOUT_PAIRS = ("report.html", "verdict.json", "curves.csv")


def figure_files(names) -> tuple[str, ...]:
    """Files of the figures of these names."""
    return tuple(f"figures/{name}.{suffix}" for name in names for suffix in ("svg", "pdf"))


def write_report(analysis: Analysis | SinglesOnly, folder: str | Path) -> dict[str, Path]:
    """Write the page, the figures, the tables and the draws; of data without a pair what there is of these.

    Everything is written to a folder beside the final one and moved when it is complete.

    Parameters
    ----------
    analysis : Analysis or SinglesOnly
    folder : str or Path
        New, empty, or an earlier report with nothing else in it, which is replaced.

    Returns
    -------
    dict of str to Path
        Every file by its name relative to the folder.

    Raises
    ------
    CaseError
        If the folder holds anything but an earlier report, or cannot be written.
    """
    folder = check_folder(folder)
    try:
        write_folder(folder, partial(_write_all, analysis))
    except OSError as error:
        raise CaseError(
            f"report folder: got {folder}, which cannot be written ({error.strerror or error}); "
            "must be a place where files may be created; choose another with --out"
        ) from error
    written = WITHOUT_PAIRS if isinstance(analysis, SinglesOnly) else FILES
    return {name: folder / name for name in (*written, *figure_files(names_of(analysis)))}


def write_folder(folder: Path, fill: Callable[[Path], None]) -> None:
    """Have a folder filled beside the final one, and move it there when it is complete.

    Raises
    ------
    OSError
        If it cannot be written; what was there is left.
    """
    folder.parent.mkdir(parents=True, exist_ok=True)
    with tempfile.TemporaryDirectory(prefix=f".{folder.name}-", dir=folder.parent) as scratch:
        new = Path(scratch) / "new"
        new.mkdir()
        fill(new)
        _put_in_place(new, folder, Path(scratch) / "old")


def _put_in_place(new: Path, folder: Path, aside: Path) -> None:
    """Move `new` to `folder`; what was there comes back if that fails."""
    earlier = folder.exists()
    if earlier:
        os.replace(folder, aside)
    try:
        os.replace(new, folder)
    except BaseException:
        if earlier:
            os.replace(aside, folder)
        raise


def check_folder(folder: str | Path) -> Path:
    """The folder as an absolute path, if a report may be written there.

    Raises
    ------
    CaseError
        If something else is there.
    """
    folder = Path(folder).resolve()
    try:
        if not folder.exists():
            return folder
        if not folder.is_dir():
            raise CaseError(
                f"report folder: got {folder}, which is a file; must be a folder; choose another with --out"
            )
        found = {path.relative_to(folder).as_posix() for path in folder.rglob("*") if not path.is_dir()}
    except OSError as error:
        raise CaseError(
            f"report folder: got {str(folder)[:200]}, which cannot be read ({error.strerror or error}); "
            "must be a place where files may be created; choose another with --out"
        ) from error
    if not found:
        return folder
    foreign = sorted(found - {*FILES, *figure_files((*FIGURES, *EARLIER_FIGURES))})
    if foreign or not _is_report(folder / "verdict.json"):
        what = f"{foreign[0]} in it" if foreign else "no verdict.json of an earlier report in it"
        raise CaseError(
            f"report folder: got {folder} with {what}; must be new, empty, or hold an earlier report and "
            "nothing else; choose another with --out, or move the other files away"
        )
    return folder


def _is_report(path: Path) -> bool:
    try:
        return "schema" in json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError, TypeError):
        return False


def _write_all(analysis: Analysis | SinglesOnly, folder: Path) -> None:
    names = names_of(analysis)
    if names:
        (folder / "figures").mkdir()
    drawings = {}
    for name in names:
        figure = draw(name, analysis)
        drawings[name] = svg(figure, name)
        (folder / "figures" / f"{name}.svg").write_text(drawings[name], encoding="utf-8", newline="\n")
        (folder / "figures" / f"{name}.pdf").write_bytes(pdf(figure, name))
    write_curves_csv(analysis, folder / "curves.csv")
    if isinstance(analysis, SinglesOnly):
        text = singles_page(analysis, drawings)
    else:
        text = page(analysis, drawings)
        write_curves_netcdf(analysis, folder / "curves.nc")
        write_posterior(analysis, folder / "posterior.nc")
        write_tex(analysis, folder / "table.tex")
    (folder / "report.html").write_text(text, encoding="utf-8", newline="\n")
    (folder / "verdict.json").write_text(verdict_text(analysis), encoding="utf-8", newline="\n")
