"""One line for each run: a table for other programs and a page."""

import csv
import io
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from regimes.batch.earlier import read_verdict
from regimes.batch.outcome import Outcome
from regimes.errors import CaseError
from regimes.report.render import render
from regimes.report.words import ARROW, DECISIONS, DISPLAY
from regimes.units import KM
from regimes.verdict.digits import km, slope_text

FILES = ("overview.html", "overview.csv")
COLUMNS = (
    "case", "variant", "case_file", "folder", "state", "exit_code", "decision", "supported",
    "alpha_from_km", "alpha_to_km", "alpha_kind", "alpha", "alpha_lo95", "alpha_hi95",
    "transitions", "cautions", "message",
)  # fmt: skip
LIKELY = 0.5  # transitions at least as probable are shown
STATES = {"done": "done", "kept": "kept from before", "failed": "failed", "not run": "not run"}


def check_overview(folder: str | Path) -> Path:
    """The folder as an absolute path, if an overview may be written there.

    Raises
    ------
    CaseError
        If it is a file, or holds an overview of something else.
    """
    folder = Path(folder).resolve()
    table = folder / "overview.csv"
    if folder.exists() and not folder.is_dir():
        raise CaseError(f"folder of the reports: got {folder}, which is a file; must be a folder; choose with --out")
    there = [name for name in FILES if (folder / name).exists()]
    if there and not (table.is_file() and table.read_bytes().startswith(",".join(COLUMNS).encode())):
        raise CaseError(
            f"folder of the reports: got {folder} with another {there[0]}; must have none but of earlier runs; choose "
            "another with --out, or move it away"
        )
    return folder


def write_overview(outcomes: Sequence[Outcome], folder: str | Path) -> Path:
    """Write ``overview.html`` and ``overview.csv``.

    Parameters
    ----------
    outcomes : sequence of Outcome
    folder : str or Path
        The common folder of the reports.

    Returns
    -------
    Path
        Of the page.

    Raises
    ------
    CaseError
        If the folder cannot be written, or holds an overview of something else.
    """
    folder = check_overview(folder)
    documents = [read_verdict(o.task.folder) if o.reported else None for o in outcomes]
    rows = [table_row(o, d) for o, d in zip(outcomes, documents, strict=True)]
    lines = [page_row(o, d) for o, d in zip(outcomes, documents, strict=True)]
    counts = [(word, sum(o.state == state for o in outcomes)) for state, word in STATES.items()]
    page = render("overview.html.j2", {"case": "Overview", "lines": lines, "counts": [(w, n) for w, n in counts if n]})
    try:
        folder.mkdir(parents=True, exist_ok=True)
        (folder / "overview.csv").write_text(_csv(rows), encoding="utf-8", newline="\n")
        (folder / "overview.html").write_text(page, encoding="utf-8", newline="\n")
    except OSError as error:
        raise CaseError(
            f"folder of the reports: got {folder}, which cannot be written ({error.strerror or error}); must be a "
            "place where files may be created; choose another with --out"
        ) from error
    return folder / "overview.html"


def table_row(outcome: Outcome, document: dict[str, Any] | None) -> dict[str, Any]:
    """One line of the table; `document` is the verdict, None where there is no report. Lengths in km."""
    task = outcome.task
    row = dict.fromkeys(COLUMNS, "") | {
        "case": task.case.name if task.case is not None else "",
        "variant": task.variant,
        "case_file": task.source,
        "folder": task.folder.name,
        "state": outcome.state,
        "exit_code": outcome.code if outcome.state != "not run" else "",
        "message": outcome.message,
    }
    if document is None:
        return row
    row["decision"] = document["decision"]
    row["supported"] = "; ".join(f"{s['regime']} {s['low_km']:g}-{s['high_km']:g}" for s in document["supported"])
    row["transitions"] = "; ".join(
        f"{t['from']}-{t['to']} {t['median_km']:g} ({t['lo95_km']:g}-{t['hi95_km']:g})" for t in _likely(document)
    )
    row["cautions"] = " ".join(c["code"] for c in document["cautions"])
    slope = quoted_slope(document)
    if slope is not None:
        (row["alpha_from_km"], row["alpha_to_km"]), row["alpha_kind"] = slope["range_km"], slope["kind"]
        row |= {"alpha": slope["median"], "alpha_lo95": slope["lo95"], "alpha_hi95": slope["hi95"]}
    return row


def page_row(outcome: Outcome, document: dict[str, Any] | None) -> dict[str, Any]:
    """The same in the words and digits of the page."""
    task = outcome.task
    row = {
        "name": task.variant or (task.case.name if task.case is not None else task.source),
        "of": task.case.name.removesuffix(f" ({task.variant})") if task.variant and task.case is not None else "",
        "link": f"{task.folder.name}/report.html" if document is not None else "",
        "state": STATES[outcome.state],
        "message": outcome.message if document is None else "",
        "decision": "",
    }
    if document is None:
        return row
    slope = quoted_slope(document)
    return row | {
        "decision": DECISIONS[document["decision"]],
        "supported": [f"{DISPLAY[s['regime']]} {_range(s['low_km'], s['high_km'])}" for s in document["supported"]],
        "alpha": "none quoted" if slope is None else _alpha(slope),
        "range": "" if slope is None else _range(*slope["range_km"]),
        "transitions": [
            f"{DISPLAY[t['from']]}{ARROW}{DISPLAY[t['to']]} at {_km(t['median_km'])} km "
            f"({_km(t['lo95_km'])} to {_km(t['hi95_km'])})"
            for t in _likely(document)
        ],
        "cautions": [c["code"] for c in document["cautions"]],
    }  # fmt: skip


def quoted_slope(document: dict[str, Any]) -> dict[str, Any] | None:
    """The first slope from exit rates that says anything: over the wished range, else the smallest separations."""
    said = (s for s in document["slopes"] if s["curve"] == "exit_rate" and s["kind"] != "none")
    return next(said, None)


def _alpha(slope: dict[str, Any]) -> str:
    if slope["kind"] == "lower_bound":
        return f"\u2265 {slope_text(slope['lo95'])}"
    if slope["kind"] == "upper_bound":
        return f"\u2264 {slope_text(slope['hi95'])}"
    return f"{slope_text(slope['median'])} ({slope_text(slope['lo95'])} to {slope_text(slope['hi95'])})"


def _likely(document: dict[str, Any]) -> list[dict[str, Any]]:
    return [t for t in document["transitions"] if t["probability"] >= LIKELY]


def _km(value: float) -> str:
    return km(value * KM)


def _range(low: float, high: float) -> str:
    return f"{_km(low)} to {_km(high)} km"


def _csv(rows: list[dict[str, Any]]) -> str:
    text = io.StringIO()
    writer = csv.DictWriter(text, COLUMNS, lineterminator="\n")
    writer.writeheader()
    writer.writerows({k: "" if v is None else v for k, v in row.items()} for row in rows)
    return text.getvalue()
