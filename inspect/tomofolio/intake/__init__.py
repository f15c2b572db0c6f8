"""From files to a volume: the only room that knows file formats."""

from tomofolio.intake.reading import read_series
from tomofolio.intake.surveying import SeriesSummary, survey

__all__ = ["SeriesSummary", "read_series", "survey"]
