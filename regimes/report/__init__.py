"""Pictures, tables and files of one analysis."""

from regimes.report.audit import findings_text, write_findings
from regimes.report.files import check_folder, write_report
from regimes.report.plan_files import check_plan_folder, write_plan
from regimes.report.plan_words import plan_sentence
from regimes.report.verdict_json import verdict_document

__all__ = [
    "check_folder",
    "check_plan_folder",
    "findings_text",
    "plan_sentence",
    "verdict_document",
    "write_findings",
    "write_plan",
    "write_report",
]
