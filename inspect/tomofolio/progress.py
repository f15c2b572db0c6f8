"""How long work tells how far it is: stages with a name, and a fraction inside the stage."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import Protocol

#: Called with 0 … 1 as a stage goes on.
Fraction = Callable[[float], None]


class Progress(Protocol):
    """Anything that can show stages one after the other."""

    def stage(self, name: str) -> Fraction:
        """Begin a stage, ending the one before."""


class Quiet:
    """Shows nothing: for pipes, for scripts, for use as a library."""

    def stage(self, name: str) -> Fraction:
        return _ignore


def _ignore(fraction: float) -> None:
    return None


class _Bars:
    """One bar per stage on the terminal's error stream."""

    def __init__(self, bars: object) -> None:
        self._bars = bars
        self._task: object = None

    def stage(self, name: str) -> Fraction:
        self.finish()
        task = self._bars.add_task(name, total=1.0)  # type: ignore[attr-defined]
        self._task = task
        return lambda fraction: self._bars.update(task, completed=fraction)  # type: ignore[attr-defined]

    def finish(self) -> None:
        if self._task is not None:
            self._bars.update(self._task, completed=1.0)  # type: ignore[attr-defined]


@contextmanager
def shown_progress() -> Iterator[Progress]:
    """Progress on standard error where that is a terminal, else quiet."""
    if not sys.stderr.isatty():
        yield Quiet()
        return
    from rich.console import Console
    from rich.progress import BarColumn, TextColumn, TimeElapsedColumn
    from rich.progress import Progress as Bars

    columns = (TextColumn("{task.description:<28}"), BarColumn(bar_width=28), TimeElapsedColumn())
    with Bars(*columns, console=Console(stderr=True)) as bars:
        shown = _Bars(bars)
        yield shown
        shown.finish()
