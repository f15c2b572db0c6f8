"""The date of the run, the only clock that a result may show."""

from __future__ import annotations

import os
from datetime import UTC, datetime

from tomofolio.errors import CallError


def run_time() -> str:
    """Date of the run, ISO 8601 in UTC: ``SOURCE_DATE_EPOCH`` where it is set, else now.

    Raises
    ------
    CallError : ``SOURCE_DATE_EPOCH`` is not a whole number of seconds.
    """
    epoch = os.environ.get("SOURCE_DATE_EPOCH")
    if not epoch:
        return datetime.now(UTC).replace(microsecond=0).isoformat()
    try:
        return datetime.fromtimestamp(int(epoch), UTC).isoformat()
    except (ValueError, OverflowError, OSError) as error:
        raise CallError(f"SOURCE_DATE_EPOCH = {epoch!r} is not a number of seconds") from error
