"""What pydicom and its decoders say on the side is caught, so that it never reaches the terminal."""

from __future__ import annotations

import logging
import warnings
from collections.abc import Iterator
from contextlib import contextmanager

import pydicom


class _Collector(logging.Handler):
    def __init__(self, said: list[str]) -> None:
        super().__init__(logging.WARNING)
        self._said = said

    def emit(self, record: logging.LogRecord) -> None:
        self._said.append(record.getMessage())


@contextmanager
def quiet_pydicom() -> Iterator[list[str]]:
    """Within the block, warnings and log lines go into the list that is given, and nowhere else.

    Values are read without validation: what a value must be like is checked where it is used. Everything is as
    before afterwards.
    """
    said: list[str] = []
    loggers = [logging.getLogger(name) for name in ("pydicom", "pylibjpeg", "openjpeg", "PIL")]
    before = [(logger.handlers[:], logger.propagate) for logger in loggers]
    mode = pydicom.config.settings.reading_validation_mode
    collector = _Collector(said)
    try:
        for logger in loggers:
            logger.handlers, logger.propagate = [collector], False
        pydicom.config.settings.reading_validation_mode = pydicom.config.IGNORE
        with warnings.catch_warnings():
            warnings.simplefilter("always")
            warnings.showwarning = lambda message, *rest, **more: said.append(str(message))
            yield said
    finally:
        pydicom.config.settings.reading_validation_mode = mode
        for logger, (handlers, propagate) in zip(loggers, before, strict=True):
            logger.handlers, logger.propagate = handlers, propagate
