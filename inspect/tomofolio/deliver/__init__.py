"""Figures and pictures as files beside the report."""

from tomofolio.deliver.measurements import measurements, measurements_text
from tomofolio.deliver.tables import ranges_csv, voids_csv
from tomofolio.deliver.whole import check_data_path, check_report_path, written_whole

__all__ = [
    "check_data_path",
    "check_report_path",
    "measurements",
    "measurements_text",
    "ranges_csv",
    "voids_csv",
    "written_whole",
]
