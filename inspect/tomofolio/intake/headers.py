"""What the intake keeps of one object's header: enough to group, check, sort and decode it, and no more."""

from __future__ import annotations

import struct
from dataclasses import dataclass
from typing import BinaryIO

import pydicom
from pydicom.dataset import FileDataset
from pydicom.uid import (
    UID,
    EnhancedCTImageStorage,
    ImplicitVRLittleEndian,
    LegacyConvertedEnhancedCTImageStorage,
    MediaStorageDirectoryStorage,
)

from tomofolio.intake.elements import code, codes, finite, number, numbers, text, whole
from tomofolio.intake.frames import frame_headers
from tomofolio.intake.kind import Evidence, gather_evidence
from tomofolio.intake.sources import Source

PIXEL_DATA = 0x7FE00010
FLOAT_PIXEL_DATA = (0x7FE00008, 0x7FE00009)


@dataclass(frozen=True, slots=True)
class Pixels:
    """How the numbers of one object are stored.

    ``offset``, ``length`` of the value in the file are in bytes; ``length`` is None where the data are encapsulated
    (compressed), ``offset`` where there are none. ``frame`` is the place among the ``frames`` of a multi-frame
    object. ``padding`` is the lowest and highest stored number that stands for "no data".
    """

    transfer_syntax: str
    rows: int
    columns: int
    samples: int
    frames: int
    photometric: str
    bits_allocated: int
    bits_stored: int
    high_bit: int
    signed: bool
    offset: int | None
    length: int | None
    file_size: int
    padding: tuple[int, int] | None
    frame: int = 0


@dataclass(frozen=True, slots=True)
class Header:
    """One object. Numbers are None where they are not recorded and NaN where what is recorded is no number."""

    source: Source
    sop_class: str
    sop_instance: str
    patient: str
    study: str
    series: str
    series_number: str
    frame_of_reference: str
    modality: str
    description: str
    image_type: tuple[str, ...]
    pixels: Pixels
    orientation: tuple[float, ...] | None
    position_mm: tuple[float, ...] | None
    pixel_spacing_mm: tuple[float, ...] | None
    thickness_mm: float | None
    slope: float | None
    intercept: float | None
    rescale_type: str
    has_lookup_table: bool
    acquisition: str
    kvp: float | None
    current_ma: float | None
    exposure_mas: float | None
    kernel: str
    phase: str
    lossy: bool
    window: tuple[float, float] | None
    evidence: Evidence


#: Multi-frame classes whose frames are read as slices.
MULTI_FRAME = (EnhancedCTImageStorage, LegacyConvertedEnhancedCTImageStorage)


class DamagedError(Exception):
    """A DICOM object that cannot be parsed, or whose header ends before it says which series it belongs to."""


def read_headers(source: Source) -> list[Header]:
    """Read the header of one object, without its pixels.

    Returns
    -------
    One header, or one for each frame of a multi-frame CT object; none where the source is no DICOM object, or is a
    DICOMDIR.

    Raises
    ------
    DamagedError : it is a DICOM object, or cannot be opened to tell, and cannot be read.
    """
    try:
        with source.open() as stream:
            start = stream.read(132)
            declared = start[128:] == b"DICM"
            if not declared and not _looks_like_elements(start):
                return []
            stream.seek(0)
            dataset = pydicom.dcmread(stream, stop_before_pixels=True, force=True)
            offset, length = _pixel_extent(stream, dataset)
        sop_class = _sop_class(dataset)
        if sop_class == MediaStorageDirectoryStorage or not (declared or sop_class):
            return []
        header = _header(source, dataset, offset, length)
        if not header.series:
            raise DamagedError("Series Instance UID is missing")
        return frame_headers(header, dataset) if sop_class in MULTI_FRAME else [header]
    except DamagedError:
        raise
    except Exception as error:  # a damaged file makes pydicom and zipfile raise almost anything
        reason = " ".join(str(error).split()) or type(error).__name__
        raise DamagedError(reason) from error


def _looks_like_elements(start: bytes) -> bool:
    """Whether a file without preamble begins like DICOM: with an element of group 0002 or 0008."""
    if len(start) < 16 or start[:2] not in (b"\x02\0", b"\x08\0", b"\0\x08"):
        return False
    order = ">" if start[0] == 0 else "<"
    number, length = struct.unpack(f"{order}2xHI", start[:8])
    explicit = start[4:6].isalpha() and start[4:6].isupper()
    return number < 0x2000 and (explicit or length < 1024)


def _sop_class(dataset: FileDataset) -> str:
    return code(dataset, 0x00080016) or str(dataset.file_meta.get("MediaStorageSOPClassUID", ""))


def _pixel_extent(stream: BinaryIO, dataset: FileDataset) -> tuple[int | None, int | None]:
    """Where the value of Pixel Data begins, and how long it is declared to be (None where encapsulated).

    The parser stops right before the element. In a deflated object the positions are those of the inflated stream;
    they are then only used to know that there are pixels.
    """
    syntax = dataset.file_meta.get("TransferSyntaxUID", "")
    if syntax and UID(syntax).is_deflated:
        return 0, None
    implicit, little = dataset.original_encoding
    order = "<" if little else ">"
    element = stream.read(12)
    if len(element) < 12:
        return None, None
    at = stream.tell()
    group, number = struct.unpack(f"{order}HH", element[:4])
    if (group << 16 | number) != PIXEL_DATA:
        return None, None
    if implicit:
        (length,) = struct.unpack(f"{order}I", element[4:8])
        return at - 4, length
    (length,) = struct.unpack(f"{order}I", element[8:12])
    return at, None if length == 0xFFFFFFFF else length


def _header(source: Source, dataset: FileDataset, offset: int | None, length: int | None) -> Header:
    thickness = finite(dataset, 0x00180050)
    centre, width = finite(dataset, 0x00281050), finite(dataset, 0x00281051)
    return Header(
        source=source,
        sop_class=_sop_class(dataset),
        sop_instance=code(dataset, 0x00080018),
        patient="\n".join((code(dataset, 0x00100020), code(dataset, 0x00100010))),
        study=code(dataset, 0x0020000D),
        series=code(dataset, 0x0020000E),
        series_number=code(dataset, 0x00200011),
        frame_of_reference=code(dataset, 0x00200052),
        modality=code(dataset, 0x00080060),
        description=text(dataset, 0x0008103E),
        image_type=tuple(value.upper() for value in codes(dataset, 0x00080008)),
        pixels=_pixels(dataset, offset, length, source.size),
        orientation=numbers(dataset, 0x00200037),
        position_mm=numbers(dataset, 0x00200032),
        pixel_spacing_mm=numbers(dataset, 0x00280030),
        thickness_mm=thickness if thickness is not None and thickness > 0 else None,
        slope=number(dataset, 0x00281053),
        intercept=number(dataset, 0x00281052),
        rescale_type=code(dataset, 0x00281054),
        has_lookup_table=0x00283000 in dataset,
        acquisition=code(dataset, 0x00200012),
        kvp=finite(dataset, 0x00180060),
        current_ma=finite(dataset, 0x00181151),
        exposure_mas=finite(dataset, 0x00181152),
        kernel=", ".join(value for value in codes(dataset, 0x00181210) if value),
        phase=code(dataset, 0x00200100) or code(dataset, 0x00189241) or code(dataset, 0x00181060),
        lossy=code(dataset, 0x00282110) == "01",
        window=(centre, width) if centre is not None and width is not None and width >= 1 else None,
        evidence=gather_evidence(dataset),
    )


def _pixels(dataset: FileDataset, offset: int | None, length: int | None, file_size: int) -> Pixels:
    signed = whole(dataset, 0x00280103) == 1
    stored = whole(dataset, 0x00280101) or 0
    frames = finite(dataset, 0x00280008)
    padding = whole(dataset, 0x00280120, signed=signed)
    limit = whole(dataset, 0x00280121, signed=signed)
    limits = None if padding is None else (padding, padding if limit is None else limit)
    high_bit = whole(dataset, 0x00280102)
    return Pixels(
        transfer_syntax=str(dataset.file_meta.get("TransferSyntaxUID", "")) or _guessed_syntax(dataset),
        rows=whole(dataset, 0x00280010) or 0,
        columns=whole(dataset, 0x00280011) or 0,
        samples=whole(dataset, 0x00280002) or 1,
        frames=1 if frames is None else int(frames),
        photometric=code(dataset, 0x00280004),
        bits_allocated=whole(dataset, 0x00280100) or 0,
        bits_stored=stored,
        high_bit=stored - 1 if high_bit is None else high_bit,
        signed=signed,
        offset=offset,
        length=length,
        file_size=file_size,
        padding=None if limits is None else (min(limits), max(limits)),
    )


def _guessed_syntax(dataset: FileDataset) -> str:
    """Objects without file meta information are uncompressed, in the encoding that the parser found."""
    implicit, little = dataset.original_encoding
    if implicit:
        return ImplicitVRLittleEndian
    return pydicom.uid.ExplicitVRLittleEndian if little else pydicom.uid.ExplicitVRBigEndian
