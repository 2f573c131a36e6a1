"""The audit in the report and in the verdict document."""

import json
import math
import textwrap
from pathlib import Path
from typing import Any

from regimes.analysis import Analysis, SinglesOnly
from regimes.errors import CaseError
from regimes.report.digits import significant, span
from regimes.report.plain import plain
from regimes.units import KM
from regimes.verdict.finding import THREAT_WORDS, Finding


def audit_part(found: Analysis | SinglesOnly) -> list[dict[str, Any]]:
    """Every finding in plain types; nothing is audited without a pair."""
    return [] if isinstance(found, SinglesOnly) else [finding_document(finding) for finding in found.audit]


def finding_document(finding: Finding) -> dict[str, Any]:
    """One finding, separations in km."""
    where = finding.separations
    return {
        "threat": finding.threat,
        "flag": finding.flag,
        "size": finding.size,
        "measure": finding.measure,
        "separations_km": None if where is None else [end / KM for end in where],
        "verdict_changes": finding.verdict_changes,
        "text": finding.text,
    }


def audit_rows(analysis: Analysis) -> list[dict[str, Any]]:
    """What the page shows of every finding."""
    return [
        {
            "threat": THREAT_WORDS[f.threat],
            "flag": f.flag,
            "size": f"{significant(f.size)}, {f.measure}" if not math.isnan(f.size) else "not measured",
            "where": "" if f.separations is None else f"{span(*f.separations)} km",
            "changes": _without(f, analysis),
            "text": f.text,
        }
        for f in analysis.audit
    ]


def _without(finding: Finding, analysis: Analysis) -> str:
    """The verdict without the threat, in words that do not claim a test that there was not."""
    if finding.verdict_changes:
        return "another one"
    if math.isnan(finding.size):
        return "not tested"
    return "the same" if analysis.verdict.supported else "nothing supported either way"


def audit_fact(analysis: Analysis) -> tuple[str, str, str]:
    """Name, value and note of the tile on top of the page."""
    flagged = [THREAT_WORDS[f.threat] for f in analysis.audit if f.flag]
    value = f"{len(flagged)} of {len(analysis.audit)} flags" if flagged else "no flag"
    return "audit", value, ", ".join(flagged) or f"{len(analysis.audit)} threats sized"


def findings_text(found: tuple[Finding, ...]) -> str:
    """The findings as text for a terminal."""
    flagged = [THREAT_WORDS[f.threat] for f in found if f.flag]
    lines = [f"{len(flagged)} of {len(found)} threats flagged" + (f": {', '.join(flagged)}" if flagged else "")]
    for f in found:
        lines.append(f"{'FLAG' if f.flag else '  ok'}  {THREAT_WORDS[f.threat]}")
        lines += textwrap.wrap(f.text, 100, initial_indent="      ", subsequent_indent="      ")
    return "\n".join(lines)


def write_findings(found: tuple[Finding, ...], path: str | Path) -> Path:
    """Write the findings as JSON, in the form they have in verdict.json.

    Raises
    ------
    CaseError
        If the file cannot be written.
    """
    path = Path(path).resolve()
    content = json.dumps(plain([finding_document(f) for f in found]), indent=1, allow_nan=False, ensure_ascii=False)
    try:
        path.write_text(content + "\n", encoding="utf-8", newline="\n")
    except OSError as error:
        raise CaseError(
            f"--out: got {path}, which cannot be written ({error.strerror or error}); must be a file in a folder that "
            "exists; choose another"
        ) from error
    return path
