"""Pictures, tables and files of one analysis."""

from regimes.report.files import check_folder, write_report
from regimes.report.verdict_json import verdict_document

__all__ = ["check_folder", "verdict_document", "write_report"]
