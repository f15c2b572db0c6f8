"""Files that appear whole or not at all: written beside their place first, then renamed, all together."""

from __future__ import annotations

import os
import shutil
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from tomofolio.errors import OutputError


def check_report_path(path: Path) -> None:
    """Refuse a place that cannot take the report, before any long work.

    Raises
    ------
    OutputError : the folder is not there or not writable, or ``path`` is a folder or a file that is not a PDF.
    """
    folder = path.parent
    if not folder.is_dir():
        raise OutputError("there is no such folder", file=folder, remedy="Make it, or name another place with --out")
    if not os.access(folder, os.W_OK):
        raise OutputError("the folder cannot be written", file=folder, remedy="Name another place with --out")
    if path.is_dir():
        raise OutputError("this is a folder", file=path, remedy="Name a file with --out, such as report.pdf")
    if path.exists() and not _is_replaceable(path):
        raise OutputError(
            "the file exists and is not a PDF, so it is left as it is",
            file=path,
            remedy="Name another file with --out",
        )


def check_data_path(path: Path) -> None:
    """Refuse a place that cannot take the data folder, before any long work.

    Raises
    ------
    OutputError : ``path`` is a file, or its nearest existing folder is not writable.
    """
    if path.exists() and not path.is_dir():
        raise OutputError("this is a file", file=path, remedy="Name a folder with --data")
    nearest = path
    while not nearest.exists():
        nearest = nearest.parent
    if not nearest.is_dir() or not os.access(nearest, os.W_OK):
        raise OutputError("the folder cannot be written", file=nearest, remedy="Name another place with --data")


def _is_replaceable(path: Path) -> bool:
    try:
        with path.open("rb") as file:
            start = file.read(5)
    except OSError as error:
        raise OutputError(f"the file exists and cannot be read ({error.strerror})", file=path) from error
    return start in (b"%PDF-", b"")


@contextmanager
def written_whole(report: Path, data: Path | None) -> Iterator[tuple[Path, Path | None]]:
    """Lend temporary places for the report and the data folder; on leaving without an error all files move.

    Yields
    ------
    (report, data) : a file path and an empty folder (None if ``data`` is None) to write into.

    Raises
    ------
    OutputError : something could not be written or moved; what was there before is left as it was.
    """
    workshop: list[Path] = []
    new_folder = data if data is not None and not data.exists() else None
    try:
        report_shop = Path(tempfile.mkdtemp(prefix=".tomofolio-", dir=report.parent))
        workshop.append(report_shop)
        data_shop = None
        if data is not None:
            data.mkdir(parents=True, exist_ok=True)
            data_shop = Path(tempfile.mkdtemp(prefix=".tomofolio-", dir=data))
            workshop.append(data_shop)
        yield report_shop / report.name, data_shop
        if data is not None and data_shop is not None:
            _move_files(data_shop, data)
        (report_shop / report.name).replace(report)
    except OSError as error:
        place = error.filename or report
        raise OutputError(
            f"cannot be written ({error.strerror or error})", file=place, remedy="Check the space and the permissions"
        ) from error
    finally:
        for folder in workshop:
            shutil.rmtree(folder, ignore_errors=True)
        if new_folder is not None and new_folder.is_dir() and not any(new_folder.iterdir()):
            new_folder.rmdir()


def _move_files(source: Path, target: Path) -> None:
    files = sorted(path for path in source.rglob("*") if path.is_file())
    for path in files:
        place = target / path.relative_to(source)
        place.parent.mkdir(parents=True, exist_ok=True)
        if place.is_dir():
            raise OutputError("a folder stands where a file must go", file=place)
    for path in files:
        path.replace(target / path.relative_to(source))
