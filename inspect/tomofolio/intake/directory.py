"""DICOMDIR: the table of contents of a DICOM medium (DICOM PS3.10 and PS3.3 Annex F)."""

from __future__ import annotations

from pathlib import Path

import pydicom
from pydicom.uid import MediaStorageDirectoryStorage

from tomofolio.errors import InputError


def is_directory_file(path: Path) -> bool:
    """Whether a DICOM file is a DICOMDIR, by its class and not by its name."""
    try:
        meta = pydicom.filereader.read_file_meta_info(path)
    except Exception:  # whatever is broken here will be said when the file is read as an image
        return False
    return meta.get("MediaStorageSOPClassUID") == MediaStorageDirectoryStorage


def listed_files(path: Path) -> tuple[list[Path], int]:
    """The files that a DICOMDIR lists and that are there, sorted, and how many are not there.

    File IDs are upper case on the medium; a copy may have made them lower case. A file ID that would lead out of
    the DICOMDIR's folder is left out.

    Raises
    ------
    InputError : it cannot be parsed, or none of its files is there.
    """
    try:
        records = pydicom.dcmread(path).get("DirectoryRecordSequence") or []
        ids = [record.ReferencedFileID for record in records if record.get("ReferencedFileID")]
    except Exception as error:
        raise InputError(
            "the DICOMDIR cannot be read", file=path, remedy="Give the folder that holds the images instead"
        ) from error
    found = set()
    missing = 0
    for file_id in ids:
        parts = [file_id] if isinstance(file_id, str) else [str(part) for part in file_id]
        file = _locate(path.parent, parts)
        if file is None:
            missing += 1
        else:
            found.add(file)
    if not found:
        raise InputError(
            f"none of the {len(ids)} files that the DICOMDIR lists is there",
            file=path,
            remedy="Copy the whole medium, or give the folder that holds the images",
        )
    return sorted(found), missing


def _locate(folder: Path, parts: list[str]) -> Path | None:
    if any(part in ("", ".", "..") or "/" in part or "\\" in part for part in parts):
        return None
    for spelling in (parts, [part.lower() for part in parts]):
        file = folder.joinpath(*spelling)
        if file.is_file():
            return file
    return None
