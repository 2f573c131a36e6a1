"""The folder of a comparison: complete or not there."""

import json
from functools import partial
from pathlib import Path

from regimes.compare.document import text_of
from regimes.compare.figures import FIGURES, draw
from regimes.compare.page import page
from regimes.compare.record import Comparison
from regimes.errors import CaseError
from regimes.report.figures import pdf, svg
from regimes.report.files import write_folder

FILES = (
    "comparison.html",
    "comparison.json",
    *(f"figures/{name}.{suffix}" for name in FIGURES for suffix in ("svg", "pdf")),
)


def write_comparison(comparison: Comparison, folder: str | Path) -> dict[str, Path]:
    """Write page, document and figures.

    Everything is written to a folder beside the final one and moved when it is complete.

    Parameters
    ----------
    comparison : Comparison
    folder : str or Path
        New, empty, or an earlier comparison with nothing else in it, which is replaced.

    Returns
    -------
    dict of str to Path
        Every file by its name relative to the folder.

    Raises
    ------
    CaseError
        If the folder holds anything but an earlier comparison, or cannot be written.
    """
    folder = check_comparison_folder(folder)
    try:
        write_folder(folder, partial(_write_all, comparison))
    except OSError as error:
        raise CaseError(
            f"--out: got {folder}, which cannot be written ({error.strerror or error}); must be a place where files "
            "may be created; choose another"
        ) from error
    return {name: folder / name for name in FILES}


def check_comparison_folder(folder: str | Path) -> Path:
    """The folder as an absolute path, if a comparison may be written there.

    Raises
    ------
    CaseError
        If something else is there.
    """
    folder = Path(folder).resolve()
    if folder.is_file():
        raise CaseError(f"--out: got {folder}, which is a file; must be a folder; choose another")
    found = (
        {p.relative_to(folder).as_posix() for p in folder.rglob("*") if not p.is_dir()} if folder.exists() else set()
    )
    foreign = sorted(found - set(FILES))
    if foreign or (found and not _is_comparison(folder / "comparison.json")):
        what = f"{foreign[0]} in it" if foreign else "no comparison.json of an earlier comparison in it"
        raise CaseError(
            f"--out: got {folder} with {what}; must be new, empty, or hold an earlier comparison and nothing else; "
            "choose another, or move the other files away"
        )
    return folder


def _is_comparison(path: Path) -> bool:
    try:
        return "same_flow" in json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError, TypeError):
        return False


def _write_all(comparison: Comparison, folder: Path) -> None:
    (folder / "figures").mkdir()
    drawings = {}
    for name in FIGURES:
        figure = draw(name, comparison)
        drawings[name] = svg(figure, name)
        (folder / "figures" / f"{name}.svg").write_text(drawings[name], encoding="utf-8", newline="\n")
        (folder / "figures" / f"{name}.pdf").write_bytes(pdf(figure, name))
    (folder / "comparison.html").write_text(page(comparison, drawings), encoding="utf-8", newline="\n")
    (folder / "comparison.json").write_text(text_of(comparison), encoding="utf-8", newline="\n")
