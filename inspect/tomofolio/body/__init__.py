"""Finds the object in the scan once: what is material, what is outside, what is closed in, what is left out."""

from tomofolio.body.find import find_body
from tomofolio.body.result import Body, Excluded, Region

__all__ = ["Body", "Excluded", "Region", "find_body"]
