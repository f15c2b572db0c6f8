"""Places that one DICOM object can be read from: a file, or a member of a zip that is read in place."""

from __future__ import annotations

import io
import zipfile
from dataclasses import dataclass, field
from pathlib import Path
from typing import BinaryIO, Protocol

from tomofolio.errors import InputError

#: A zip member may not unpack to more than this: members are read whole, one by one.
MEMBER_LIMIT_BYTES = 1 << 30

#: Beyond this size in total, a zip that packs tighter than `BOMB_RATIO` is taken for a bomb. Deflate reaches 1030 to 1
#: on a constant image; real and simulated scans, noise-free ones included, stay far below 200 over a whole series.
BOMB_TOTAL_BYTES = 2 << 30
BOMB_RATIO = 200


class Source(Protocol):
    """Anything that gives the bytes of one object."""

    @property
    def label(self) -> str:
        """What to call it in a message."""

    @property
    def folder(self) -> str:
        """Where it lies: sources with the same folder lie side by side."""

    @property
    def size(self) -> int:
        """Length in bytes."""

    def open(self) -> BinaryIO:
        """A seekable stream at its beginning."""


def printable(name: str) -> str:
    """A file name as it can be shown: names may hold control characters, or bytes that are no text."""
    return "".join(letter if letter.isprintable() else "�" for letter in name)


@dataclass(frozen=True)
class FileSource:
    """A file of the file system."""

    path: Path

    @property
    def label(self) -> str:
        return printable(str(self.path))

    @property
    def folder(self) -> str:
        return str(self.path.parent)

    @property
    def size(self) -> int:
        return self.path.stat().st_size

    def open(self) -> BinaryIO:
        return self.path.open("rb")


@dataclass(frozen=True)
class ZipSource:
    """A member of a zip. The archive stays open for as long as one of its members is known."""

    archive: zipfile.ZipFile = field(repr=False)
    member: zipfile.ZipInfo = field(repr=False)

    @property
    def label(self) -> str:
        return printable(f"{self.archive.filename}/{self.member.filename}")

    @property
    def folder(self) -> str:
        return self.member.filename.rpartition("/")[0]

    @property
    def size(self) -> int:
        return self.member.file_size

    def open(self) -> BinaryIO:
        # The buffer makes the parser's small steps backwards free: inside a zip each would unpack from the start.
        return io.BufferedReader(self.archive.open(self.member), buffer_size=1 << 16)  # type: ignore[type-var]


@dataclass(frozen=True)
class MemorySource:
    """A source whose bytes have been read whole."""

    label: str
    folder: str
    data: bytes = field(repr=False)

    @property
    def size(self) -> int:
        return len(self.data)

    def open(self) -> BinaryIO:
        return io.BytesIO(self.data)


def unpacked(source: Source) -> Source:
    """The same source, unpacked into memory where it is in a zip: for jumping about in it."""
    if not isinstance(source, ZipSource):
        return source
    with source.open() as stream:
        return MemorySource(source.label, source.folder, stream.read())


def open_zip(path: Path) -> list[Source]:
    """The members of a zip, sorted by name.

    Raises
    ------
    InputError : it is broken, locked with a password, or unpacks to an absurd size.
    """
    try:
        archive = zipfile.ZipFile(path)
    except (zipfile.BadZipFile, OSError, NotImplementedError, ValueError) as error:
        raise InputError(f"the zip cannot be read ({error})", file=path, remedy="Copy or make it anew") from error
    members = [member for member in archive.infolist() if not member.is_dir()]
    _refuse_bomb(path, members)
    if any(member.flag_bits & 0x1 for member in members):
        remedy = "Unpack it and give the folder"
        raise InputError("the zip is locked with a password", file=path, remedy=remedy)
    return [ZipSource(archive, member) for member in sorted(members, key=lambda member: member.filename)]


def _refuse_bomb(path: Path, members: list[zipfile.ZipInfo]) -> None:
    total = sum(member.file_size for member in members)
    packed = max(sum(member.compress_size for member in members), 1)
    largest = max((member.file_size for member in members), default=0)
    if largest > MEMBER_LIMIT_BYTES or (total > BOMB_TOTAL_BYTES and total > BOMB_RATIO * packed):
        raise InputError(
            f"the zip would unpack to an absurd size ({total / 2**30:.1f} GiB from {packed / 2**20:.1f} MiB)",
            file=path,
            remedy="If it is sound, unpack it and give the folder",
        )
