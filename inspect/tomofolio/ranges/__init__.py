"""Finds the value ranges of materials or tissues from the scan's own histogram."""

from tomofolio.ranges.find import find_ranges
from tomofolio.ranges.result import Histogram, Ranges, ValueRange

__all__ = ["Histogram", "Ranges", "ValueRange", "find_ranges"]
