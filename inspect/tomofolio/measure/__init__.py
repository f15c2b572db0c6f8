"""From object and ranges to figures: range volumes, part, voids and inclusions."""

from tomofolio.measure.measuring import measure
from tomofolio.measure.statement import boundaries_statement

__all__ = ["boundaries_statement", "measure"]
