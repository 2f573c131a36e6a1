"""The folder of a plan."""

import os
from pathlib import Path

from regimes.errors import CaseError
from regimes.plan import Plan
from regimes.plan.progress import FILE
from regimes.report.figures.plan import plan_figures
from regimes.report.figures.style import pdf, svg
from regimes.report.plan_json import plan_table, plan_text
from regimes.report.plan_page import CAPTIONS, plan_page

FILES = ("plan.html", "plan.json", "plan.csv", FILE)
_FIGURES = tuple(f"figures/{name}.{suffix}" for name in CAPTIONS for suffix in ("svg", "pdf"))


def check_plan_folder(folder: str | Path) -> Path:
    """The folder as an absolute path, if a plan may be written there.

    Raises
    ------
    CaseError
        If something else is there.
    """
    folder = Path(folder).resolve()
    if folder.exists() and not folder.is_dir():
        raise CaseError(
            f"folder of the plan: got {folder}, which is a file; must be a folder; choose another with --out"
        )
    try:
        found = {path.relative_to(folder).as_posix() for path in folder.rglob("*") if not path.is_dir()}
    except OSError as error:
        raise CaseError(_unwritable(folder, error)) from error
    foreign = sorted(found - {*FILES, f".{FILE}", *_FIGURES})
    if foreign:
        raise CaseError(
            f"folder of the plan: got {folder} with {foreign[0]} in it; must be new, empty, or hold an earlier plan "
            "and nothing else; choose another with --out, or move the other files away"
        )
    return folder


def write_plan(plan: Plan, folder: str | Path) -> Path:
    """Write page, figures, document and table; returns the path of the page.

    Raises
    ------
    CaseError
        If the folder holds something else or cannot be written.
    """
    folder = check_plan_folder(folder)
    figures = plan_figures(plan)
    drawings = {name: svg(figure, f"plan-{name}") for name, figure in figures.items()}
    try:
        (folder / "figures").mkdir(parents=True, exist_ok=True)
        for name in _FIGURES:
            (folder / name).unlink(missing_ok=True)
        for name, figure in figures.items():
            _write(folder / "figures" / f"{name}.svg", drawings[name])
            (folder / "figures" / f"{name}.pdf").write_bytes(pdf(figure, name))
        _write(folder / "plan.csv", plan_table(plan))
        _write(folder / "plan.json", plan_text(plan))
        _write(folder / "plan.html", plan_page(plan, drawings))
    except OSError as error:
        raise CaseError(_unwritable(folder, error)) from error
    return folder / "plan.html"


def _write(path: Path, text: str) -> None:
    """Complete or not at all."""
    part = path.with_name(f".{path.name}")
    part.write_text(text, encoding="utf-8", newline="\n")
    os.replace(part, path)


def _unwritable(folder: Path, error: OSError) -> str:
    return (
        f"folder of the plan: got {str(folder)[:200]}, which cannot be written ({error.strerror or error}); must be a "
        "place where files may be created; choose another with --out"
    )
