"""The one family of errors that a caller has to know.

Each says what is wrong, in which file, and what to do. Only the command line turns them into exit codes.
"""

from __future__ import annotations

from pathlib import Path


class TomofolioError(Exception):
    """Something that the user can understand and mend.

    Parameters
    ----------
    problem : what is wrong, one sentence without its full stop.
    file : the file or folder it is about, where there is one.
    remedy : what to do about it, one sentence without its full stop.
    """

    def __init__(self, problem: str, *, file: Path | str | None = None, remedy: str = "") -> None:
        self.problem = problem
        self.file = None if file is None else str(file)
        self.remedy = remedy
        super().__init__(self.__str__())

    def __str__(self) -> str:
        where = f"{self.file}: " if self.file else ""
        remedy = f" {self.remedy}." if self.remedy else ""
        return f"{where}{self.problem}.{remedy}"


class CallError(TomofolioError):
    """The command, an option, a job sheet or a preset is wrong."""


class InputError(TomofolioError):
    """The scan cannot be used."""


class OutputError(TomofolioError):
    """The report or its data files cannot be written."""
