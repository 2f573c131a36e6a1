"""Reading a case file, with every problem reported at once."""

import tomllib
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from regimes.cases.problems import describe, headed
from regimes.cases.record import Case
from regimes.cases.sweep import label_of
from regimes.errors import CaseError

_PATHS = (("observations", "path"), ("single", "mean_flow"))


def load_case(path: str | Path) -> Case:
    """Read a case file (TOML).

    Parameters
    ----------
    path : str or Path
        Relative paths inside are taken from the folder of the case file.

    Returns
    -------
    Case
        With its paths ready to open.

    Raises
    ------
    CaseError
        If the file cannot be read, is no TOML, or asks for what is not possible; all problems at once.
    """
    path = Path(path)
    return case_from(read_toml(path), source=str(path), folder=path.parent)


def read_toml(path: Path) -> dict[str, Any]:
    """Sections and keys of a case file.

    Raises
    ------
    CaseError
        If the file cannot be read or is no TOML.
    """
    try:
        text = path.read_text(encoding="utf-8-sig")
    except FileNotFoundError:
        raise CaseError(f"{path}: no such file; give the path of a case file") from None
    except (OSError, UnicodeDecodeError) as error:
        raise CaseError(f"{path}: cannot be read ({error}); must be a text file in UTF-8") from error
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise CaseError(f"{path}: no valid TOML: {error}; correct the line") from error


def case_from(content: Mapping[str, Any], source: str = "case", folder: str | Path | None = None) -> Case:
    """Check the content of a case file.

    Parameters
    ----------
    content : mapping
        Sections and keys as in the file.
    source : str
        Name to head the problems with.
    folder : str or Path, optional
        Where relative paths start; the files must exist there. Without it, paths are kept as they are and
        looked for only when the files are read.

    Returns
    -------
    Case

    Raises
    ------
    CaseError
        If there is any problem; all of them at once.
    """
    content = dict(content)
    problems: list[str] = []
    if folder is not None:
        content, problems = _resolve(content, Path(folder))
    try:
        case = Case.model_validate(content)
        problems += [problem for _, found in _attempts(case) if isinstance(found, list) for problem in found]
    except ValidationError as error:
        problems = describe(error, Case) + problems
    problems = list(dict.fromkeys(problems))
    if problems:
        raise CaseError(headed(source, problems))
    return case


def variants(case: Case) -> list[tuple[str, Case]]:
    """The cases that a sweep asks for, each with the choices that make it; the case itself without a sweep.

    Parameters
    ----------
    case : Case
        As `load_case` and `case_from` give it.

    Returns
    -------
    list of (str, Case)
        The choices in words, empty without a sweep, and the case with them, which has no sweep.
    """
    if case.sweep is None:
        return [("", case)]
    return [(label, found) for label, found in _attempts(case) if isinstance(found, Case)]


def _attempts(case: Case) -> list[tuple[str, Case | list[str]]]:
    """Each combination of a sweep as a case, or as the problems it has."""
    out: list[tuple[str, Case | list[str]]] = []
    for combination in [] if case.sweep is None else case.sweep.combinations():
        content = case.model_dump(exclude={"sweep"}, exclude_unset=True)
        label = label_of(combination)
        content["name"] = f"{case.name} ({label})"
        for place, value in combination.items():
            section, key = place.split(".")
            content[section] = content.get(section, {}) | {key: value}
        try:
            out.append((label, Case.model_validate(content)))
        except ValidationError as error:
            out.append((label, [f"sweep.{problem}" for problem in describe(error, Case)]))
    return out


def _resolve(content: dict[str, Any], folder: Path) -> tuple[dict[str, Any], list[str]]:
    """The content with its paths made ready to open, and a problem for each where nothing is there."""
    problems = []
    for name, key in _PATHS:
        section = content.get(name)
        if not isinstance(section, dict) or not isinstance(section.get(key), str) or not section[key]:
            continue
        path = folder / section[key]
        if not path.exists():
            problems.append(f'{name}.{key}: got "{section[key]}"; no such file in {folder}')
        content = content | {name: section | {key: str(path)}}
    return content, problems
