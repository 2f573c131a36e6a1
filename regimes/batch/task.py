"""What is to be run: every case, and every variant of a case that asks for a sweep."""

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from regimes.cases import Case, variants
from regimes.errors import CaseError

LONGEST = 120  # characters of a folder name


@dataclass(frozen=True, slots=True)
class Task:
    """One run.

    Parameters
    ----------
    source : str
        The case file as it was named.
    variant : str
        Choices of the sweep in words; empty for the case as it stands.
    folder : Path
        Of the report.
    case : Case or None
        None where the case file cannot be used.
    seed : int
    problem : str
        Why there is no case; empty where there is one.
    """

    source: str
    variant: str
    folder: Path
    case: Case | None
    seed: int
    problem: str = ""


def tasks_of(loaded: Sequence[tuple[str, str, Case | str]], folder: str | Path, seed: int | None = None) -> list[Task]:
    """Every run that the cases ask for.

    Parameters
    ----------
    loaded : sequence of (str, str, Case or str)
        Case file as named, name of its folder, and the case or what is wrong with it.
    folder : str or Path
        In which each run gets a folder of its own.
    seed : int, optional
        In place of those of the cases.

    Returns
    -------
    list of Task

    Raises
    ------
    CaseError
        If two runs would write to the same folder.
    """
    folder = Path(folder).resolve()
    tasks: list[Task] = []
    for source, name, case in loaded:
        if isinstance(case, str):
            tasks.append(Task(source, "", folder / name, None, 0, case))
            continue
        for label, variant in variants(case):
            place = folder / (f"{name}--{_word(label)}"[:LONGEST] if label else name)
            tasks.append(Task(source, label, place, variant, variant.seed if seed is None else seed))
    twice = [place for place, n in Counter(task.folder for task in tasks).items() if n > 1]
    if twice:
        both = sorted({f"{t.source}{f' ({t.variant})' if t.variant else ''}" for t in tasks if t.folder == twice[0]})
        raise CaseError(
            f"folder of the reports: got {twice[0]} for {' and '.join(both)}; every run must have a folder of its own; "
            "name each case once, by files or folders of different names"
        )
    return tasks


def _word(label: str) -> str:
    """Choices in words as part of a folder name."""
    joined = label.replace(", ", "_").replace(" ", "-")
    return "".join(c for c in joined if c.isalnum() or c in "._+-")
