"""The report: a case set as a PDF, and the cautions that every report carries."""

from tomofolio.report.cautions import Caution, cautions, cautions_text
from tomofolio.report.document import report_bytes, write_report

__all__ = ["Caution", "cautions", "cautions_text", "report_bytes", "write_report"]
