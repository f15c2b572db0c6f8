"""From a path to everything below it that may be a DICOM object."""

from __future__ import annotations

import os
import stat
import zipfile
from dataclasses import dataclass
from pathlib import Path

from tomofolio.errors import InputError
from tomofolio.intake.directory import is_directory_file, listed_files
from tomofolio.intake.sources import FileSource, Source, open_zip


@dataclass(frozen=True)
class Found:
    """What lies below a path; ``missing`` counts the files that a DICOMDIR lists and that are not there."""

    sources: list[Source]
    missing: int = 0


def find_sources(path: Path) -> Found:
    """All regular files below ``path``, in the order of their names.

    A folder is walked to any depth (links to folders are not followed, so that no circle can form; zips and
    DICOMDIRs inside it are not opened). A zip gives its members, a DICOMDIR the files that it lists, any other
    file itself.

    Raises
    ------
    InputError : there is no such path, or it cannot be opened.
    """
    try:
        mode = path.stat().st_mode
    except OSError as error:
        if isinstance(error, FileNotFoundError | NotADirectoryError):
            raise InputError("there is no such file or folder", file=path, remedy="Check the path") from error
        raise _cannot_open(path, error) from error
    if stat.S_ISDIR(mode):
        return Found([FileSource(file) for file in _walk(path)])
    if not stat.S_ISREG(mode):
        raise InputError("this is neither a file nor a folder", file=path, remedy="Give a folder of DICOM files")
    try:
        with path.open("rb") as stream:
            start = stream.read(132)
    except OSError as error:
        raise _cannot_open(path, error) from error
    if start[128:] == b"DICM":
        if is_directory_file(path):
            files, missing = listed_files(path)
            return Found([FileSource(file) for file in files], missing)
        return Found([FileSource(path)])
    if zipfile.is_zipfile(path) or path.suffix.lower() == ".zip":
        return Found(open_zip(path))
    return Found([FileSource(path)])


def _walk(folder: Path) -> list[Path]:
    failed: list[OSError] = []
    found = []
    for place, folders, names in os.walk(folder, onerror=failed.append):
        folders.sort()
        for name in sorted(names):
            file = Path(place, name)
            try:
                # Pipes, sockets and devices would block for ever.
                if stat.S_ISREG(file.stat().st_mode):
                    found.append(file)
            except OSError:
                continue  # a link to nowhere
    if failed:
        raise _cannot_open(Path(failed[0].filename or folder), failed[0])
    return found


def _cannot_open(path: Path, error: OSError) -> InputError:
    reason = error.strerror or type(error).__name__
    return InputError(f"it cannot be opened ({reason.lower()})", file=path, remedy="Check that you may read it")
