"""Whether a report that is there already answers a run."""

import json
from pathlib import Path
from typing import Any

from regimes.batch.outcome import Outcome
from regimes.batch.task import Task
from regimes.errors import FitError
from regimes.fixes.reading import sha256_of
from regimes.pipeline.origin import case_sha256, versions


def read_verdict(folder: Path) -> dict[str, Any] | None:
    """The verdict of the report in a folder; None without one."""
    try:
        document = json.loads((folder / "verdict.json").read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return None
    return document if isinstance(document, dict) and (folder / "report.html").is_file() else None


def kept(task: Task) -> Outcome | None:
    """The outcome of a run whose report is there: same input, choices, seed and versions; None otherwise."""
    document = read_verdict(task.folder)
    if task.case is None or document is None or "case_sha256" not in document:
        return None
    path = Path(task.case.observations.path)
    try:
        same = (
            document["versions"] == versions()
            and document["seed"] == task.seed
            and document["case_sha256"] == case_sha256(task.case)
            and document["input"]["sha256"] == sha256_of(path)
        )
    except OSError:
        return None  # the run itself will say what is wrong with the file
    if not same:
        return None
    return Outcome(task, "kept", 0 if document["health"]["ok"] else FitError.exit_code, document["sentence"])
