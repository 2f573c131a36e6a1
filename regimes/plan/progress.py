"""Campaigns that are done, kept in a file so that an interrupted plan goes on where it was."""

import hashlib
import json
import math
import os
from dataclasses import astuple
from pathlib import Path
from typing import Any

from regimes.cases import Planned
from regimes.errors import CaseError
from regimes.plan.judge import Judged

FILE = "plan-progress.json"
# What may change and leave every campaign as it is: which of them are wanted, and how many must succeed.
_WHICH = {"plan": {"campaigns": True, "releases": True, "fix_interval_h": True, "aim": {"probability"}}}


class Progress:
    """Finished campaigns by design and number.

    Parameters
    ----------
    path : Path or None
        Of the file; None keeps them in memory only.
    key : str
        Of everything that a campaign depends on but its design and number; a file with another key is not used.
    """

    def __init__(self, path: Path | None, key: str) -> None:
        self.path, self.key = path, key
        self._done: dict[str, dict[str, Judged]] = {}
        content = _read(path) if path is not None else {}
        if content.get("key") == key:
            for point, campaigns in content["campaigns"].items():
                self._done[point] = {number: _judged(values) for number, values in campaigns.items()}

    def find(self, point: str, number: int) -> Judged | None:
        """The campaign of that design and number, or None."""
        return self._done.get(point, {}).get(str(number))

    def add(self, point: str, number: int, campaign: Judged) -> None:
        """Take a finished campaign in; `save` keeps it."""
        self._done.setdefault(point, {})[str(number)] = campaign

    def save(self) -> None:
        """Write the file, complete or not at all.

        Raises
        ------
        CaseError
            If it cannot be written.
        """
        if self.path is None:
            return
        campaigns = {p: {n: _plain(c) for n, c in sorted(done.items())} for p, done in sorted(self._done.items())}
        content = {"schema": 1, "key": self.key, "campaigns": campaigns}
        part = self.path.with_name(f".{self.path.name}")
        try:
            self.path.parent.mkdir(parents=True, exist_ok=True)
            part.write_text(json.dumps(content, allow_nan=False), encoding="utf-8")
            os.replace(part, self.path)
        except OSError as error:
            raise CaseError(
                f"progress of the plan: got {self.path}, which cannot be written ({error.strerror or error}); must be "
                "in a folder where files may be created; choose another"
            ) from error


def progress_key(planned: Planned, source: dict[str, Any]) -> str:
    """Hash of all that a campaign depends on but its design and number; `source` tells versions and data."""
    content = planned.model_dump(mode="json", exclude=_WHICH | {"name": True}) | {"source": source}
    return hashlib.sha256(json.dumps(content, sort_keys=True).encode()).hexdigest()


def _read(path: Path) -> dict[str, Any]:
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return {}
    return content if isinstance(content, dict) and content.get("schema") == 1 else {}


def _plain(campaign: Judged) -> list[bool | float | None]:
    return [None if isinstance(v, float) and math.isnan(v) else v for v in astuple(campaign)]


def _judged(values: list[bool | float | None]) -> Judged:
    return Judged(*(math.nan if v is None else v for v in values))
