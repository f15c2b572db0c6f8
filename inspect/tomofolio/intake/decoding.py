"""From files to one array of stored numbers, slice by slice."""

from __future__ import annotations

import os
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace
from typing import Any

import numpy as np
import pydicom
from numpy.typing import NDArray
from pydicom.encaps import encapsulate, get_frame
from pydicom.pixels import get_decoder
from pydicom.uid import (
    UID,
    DeflatedExplicitVRLittleEndian,
    ExplicitVRBigEndian,
    JPEG2000TransferSyntaxes,
    JPEGLSTransferSyntaxes,
    RLETransferSyntaxes,
)

from tomofolio.errors import InputError
from tomofolio.intake.headers import Header, Pixels
from tomofolio.intake.padding import Padding
from tomofolio.intake.sources import Source, unpacked

#: Images wider or higher than this are refused: no detector is, and a damaged header may claim anything.
LARGEST_MATRIX = 16384

#: Compressed images above this size that would be packed tighter than this are refused: the header lies.
LARGE_IMAGE_BYTES = 64 << 20
LARGEST_COMPRESSION = 10000

#: Share of the machine's memory that the stored numbers may take.
MEMORY_SHARE = 0.8

#: Reading uncompressed slices is waiting and copying: a few threads are enough.
READERS = 4

#: Uncompressed transfer syntaxes that are nevertheless left to pydicom: rare, and with byte orders of their own.
BY_DECODER = (DeflatedExplicitVRLittleEndian, ExplicitVRBigEndian)

CUT_SHORT = "Copy the file again; it was cut short"

#: The decoder for each family of compressions; where it is not installed, pydicom takes any that is. The fastest one,
#: but not pylibjpeg for RLE: on damaged data it panics past Python's exceptions and writes to the terminal.
PREFERRED = {
    **dict.fromkeys(JPEG2000TransferSyntaxes, "pylibjpeg"),
    **dict.fromkeys(JPEGLSTransferSyntaxes, "pyjpegls"),
    **dict.fromkeys(RLETransferSyntaxes, "pydicom"),
}


class _DoesNotFitError(Exception):
    """A stored number is outside the type that was tried."""


def can_decode(transfer_syntax: str) -> bool:
    """Whether a decoder for the transfer syntax is installed."""
    try:
        return bool(get_decoder(UID(transfer_syntax)).is_available)
    except (NotImplementedError, ValueError):
        return False


def check_storage(header: Header) -> None:
    """Check that the pixels of one slice can be what the header says, before any memory is asked for.

    Raises
    ------
    InputError : no pixel data, an impossible matrix or number of bits, or fewer bytes than the matrix needs.
    """
    pixels, name = header.pixels, header.source.label
    if not 0 < pixels.rows <= LARGEST_MATRIX or not 0 < pixels.columns <= LARGEST_MATRIX:
        raise InputError(
            f"an image of {pixels.rows} × {pixels.columns} pixels is declared, which cannot be",
            file=name,
            remedy="Export the series again",
        )
    bits = (pixels.bits_allocated, pixels.bits_stored, pixels.high_bit)
    sound = pixels.bits_allocated in (8, 16, 32) and 0 < pixels.bits_stored <= pixels.bits_allocated
    if not sound or pixels.high_bit != pixels.bits_stored - 1:
        raise InputError(
            "Bits Allocated, Bits Stored and High Bit ({}, {}, {}) are a form that is not read".format(*bits),
            file=name,
            remedy="Export the series again with 16 bits allocated",
        )
    if pixels.offset is None:
        raise InputError("there are no pixel data", file=name, remedy=CUT_SHORT)
    needed = pixels.rows * pixels.columns * pixels.bits_allocated // 8
    if pixels.length is None or pixels.transfer_syntax == DeflatedExplicitVRLittleEndian:
        if needed > LARGE_IMAGE_BYTES and needed > LARGEST_COMPRESSION * pixels.file_size:
            problem = f"an image of {pixels.rows} × {pixels.columns} pixels is declared in {pixels.file_size} bytes"
            raise InputError(problem, file=name, remedy=CUT_SHORT)
        return
    there = min(pixels.length, max(pixels.file_size - pixels.offset, 0))
    if there < needed:
        raise InputError(f"the pixel data end early: {there} of {needed} bytes are there", file=name, remedy=CUT_SHORT)


def decode(
    headers: Sequence[Header], progress: Callable[[float], None] | None = None
) -> tuple[NDArray[np.integer], NDArray[np.bool_] | None]:
    """Decode the slices in the order given into one preallocated array.

    Returns
    -------
    stored : shape (slices, rows, columns), int16 where all numbers fit, else uint16 or int32.
    no_data : the same shape, see `padding`; None where every voxel is data.

    Raises
    ------
    InputError : a slice cannot be decoded, or the volume does not fit into this machine.
    """
    headers = _unpack_frames(headers)
    pixels = headers[0].pixels
    shape = (len(headers), pixels.rows, pixels.columns)
    for dtype in _candidates(pixels):
        _check_memory(headers[0], shape, dtype)
        stored, padding = np.empty(shape, dtype), Padding(shape)
        try:
            _decode_into(stored, padding, headers, progress or _ignore)
        except _DoesNotFitError:
            continue
        return stored, padding.no_data
    raise InputError(
        "stored numbers go beyond 32 bits with sign", file=headers[0].source.label, remedy="Export with 16 bits"
    )


def _unpack_frames(headers: Sequence[Header]) -> Sequence[Header]:
    """Frames inside a zip are unpacked together: each by itself would unpack all that is before it."""
    whole: dict[Source, Source] = {}
    for source in {header.source for header in headers if header.pixels.frames > 1}:
        try:
            whole[source] = unpacked(source)
        except Exception as error:  # zipfile and zlib raise many kinds
            raise InputError("the file cannot be unpacked", file=source.label, remedy=CUT_SHORT) from error
    return [replace(header, source=whole.get(header.source, header.source)) for header in headers]


def _ignore(fraction: float) -> None:
    return None


def _candidates(pixels: Pixels) -> list[type[np.integer]]:
    """Types to try, narrowest first. int16 is tried even for wider declarations: most numbers fit it all the same."""
    if pixels.bits_stored <= (16 if pixels.signed else 15):
        return [np.int16]
    if pixels.bits_stored <= 16:
        return [np.int16, np.uint16]
    return [np.int16, np.uint16, np.int32]


def _check_memory(header: Header, shape: tuple[int, int, int], dtype: type[np.integer]) -> None:
    needed = int(np.prod(shape, dtype=np.int64)) * np.dtype(dtype).itemsize
    if needed > MEMORY_SHARE * _machine_memory():
        raise InputError(
            f"the volume of {' × '.join(str(n) for n in shape)} voxels needs {needed / 2**30:.1f} GiB, "
            "more than this machine can hold",
            file=header.source.folder,
            remedy="Use a larger machine, or export with fewer slices",
        )


def _machine_memory() -> int:
    try:
        return os.sysconf("SC_PAGE_SIZE") * os.sysconf("SC_PHYS_PAGES")
    except (AttributeError, ValueError, OSError):
        return 1 << 62  # not known on this system: numpy will say so itself


def _decode_into(
    stored: NDArray[np.integer], padding: Padding, headers: Sequence[Header], progress: Callable[[float], None]
) -> None:
    def one(k: int) -> None:
        _fill(stored[k], headers[k])
        padding.look(k, stored[k], headers[k].pixels.padding)

    done = 0
    with ThreadPoolExecutor(max_workers=min(READERS, os.cpu_count() or 1)) as pool:
        try:
            for _ in pool.map(one, range(len(headers))):
                done += 1
                progress(done / len(headers))
        except BaseException:
            pool.shutdown(cancel_futures=True)
            raise


def _fill(plane: NDArray[np.integer], header: Header) -> None:
    pixels = header.pixels
    try:
        plain = pixels.length is not None and pixels.transfer_syntax not in BY_DECODER
        numbers = _read_plain(header) if plain else _read_with_decoder(header)
    except (InputError, MemoryError):
        raise
    except Exception as error:  # decoders raise almost anything
        raise InputError(
            f"the pixel data cannot be decoded, they are damaged or no {UID(pixels.transfer_syntax).name}",
            file=header.source.label,
            remedy="Copy the file again, or export the series uncompressed",
        ) from error
    _put(plane, numbers)


def _read_plain(header: Header) -> NDArray[np.integer]:
    """Uncompressed little-endian pixels, straight from their place in the file."""
    pixels = header.pixels
    cell = np.dtype(f"<{'i' if pixels.signed else 'u'}{pixels.bits_allocated // 8}")
    needed = pixels.rows * pixels.columns * cell.itemsize
    with header.source.open() as stream:
        stream.seek(pixels.offset or 0)
        data = stream.read(needed)
    if len(data) < needed:
        problem = f"the pixel data end early: {len(data)} of {needed} bytes are there"
        raise InputError(problem, file=header.source.label, remedy=CUT_SHORT)
    numbers = np.frombuffer(data, cell).reshape(pixels.rows, pixels.columns)
    return _without_unused_bits(numbers, pixels)


def _without_unused_bits(numbers: NDArray[np.integer], pixels: Pixels) -> NDArray[np.integer]:
    """Bits above the stored ones may hold anything (overlays, once): they are not part of the number."""
    unused = pixels.bits_allocated - pixels.bits_stored
    if not unused:
        return numbers
    lowest = -(1 << pixels.bits_stored - 1) if pixels.signed else 0
    highest = lowest + (1 << pixels.bits_stored) - 1
    if numbers.min() >= lowest and numbers.max() <= highest:
        return numbers
    return (numbers << unused) >> unused


def _read_with_decoder(header: Header) -> NDArray[np.integer]:
    """Compressed, deflated or big-endian pixels, by pydicom's decoders."""
    pixels = header.pixels
    decoder = get_decoder(UID(pixels.transfer_syntax))
    preferred = PREFERRED.get(UID(pixels.transfer_syntax), "")
    plugin = preferred if preferred in decoder.available_plugins else ""
    with header.source.open() as stream:
        if pixels.frames > 1 and pixels.length is None:
            stream.seek(pixels.offset or 0)
            frame = get_frame(stream, pixels.frame, number_of_frames=pixels.frames)
            numbers, _ = decoder.as_array(encapsulate([frame]), decoding_plugin=plugin, **_described(pixels))
        else:
            dataset = pydicom.dcmread(stream, force=True)
            numbers, _ = decoder.as_array(dataset, index=pixels.frame, raw=True, decoding_plugin=plugin)
    if numbers.shape != (pixels.rows, pixels.columns):
        raise ValueError(f"{numbers.shape} pixels instead of {(pixels.rows, pixels.columns)}")
    return numbers


def _described(pixels: Pixels) -> dict[str, Any]:
    """One frame, in the words of pydicom's decoders."""
    return {
        "index": 0,
        "raw": True,
        "rows": pixels.rows,
        "columns": pixels.columns,
        "samples_per_pixel": 1,
        "number_of_frames": 1,
        "photometric_interpretation": pixels.photometric,
        "bits_allocated": pixels.bits_allocated,
        "bits_stored": pixels.bits_stored,
        "pixel_representation": int(pixels.signed),
        "pixel_keyword": "PixelData",
    }


def _put(plane: NDArray[np.integer], numbers: NDArray[np.integer]) -> None:
    if not np.can_cast(numbers.dtype, plane.dtype, casting="safe"):
        limits = np.iinfo(plane.dtype)
        if int(numbers.min()) < limits.min or int(numbers.max()) > limits.max:
            raise _DoesNotFitError
    plane[...] = numbers
