"""Pictures, tables and files of one analysis."""

from regimes.report.audit import findings_text, write_findings
from regimes.report.files import check_folder, write_report
from regimes.report.verdict_json import verdict_document

__all__ = ["check_folder", "findings_text", "verdict_document", "write_findings", "write_report"]
