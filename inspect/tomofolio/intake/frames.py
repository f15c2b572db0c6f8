"""Multi-frame CT objects: one header for each frame, from the functional groups (DICOM PS3.3 C.7.6.16, from memory)."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import TYPE_CHECKING

from pydicom.dataset import Dataset

from tomofolio.intake.elements import code, codes, finite, number, numbers, real

if TYPE_CHECKING:
    from tomofolio.intake.headers import Header, Pixels

SHARED_GROUPS = 0x52009229
PER_FRAME_GROUPS = 0x52009230

#: The functional groups that are read.
PIXEL_MEASURES = 0x00289110
PLANE_POSITION = 0x00209113
PLANE_ORIENTATION = 0x00209116
VALUE_TRANSFORMATION = 0x00289145
FRAME_TYPE = 0x00189329
RAY_DETAILS = 0x00189325
EXPOSURE = 0x00189321
RECONSTRUCTION = 0x00189314
FRAME_CONTENT = 0x00209111
WINDOW = 0x00289132


def frame_headers(whole: Header, dataset: Dataset) -> list[Header]:
    """Split the header of a multi-frame object into one per frame.

    Parameters
    ----------
    whole : the header of the object, without what differs between frames.
    dataset : the same header as parsed.

    Raises
    ------
    ValueError : the functional groups don't fit the number of frames.
    """
    shared = _items(dataset, SHARED_GROUPS)
    frames = _items(dataset, PER_FRAME_GROUPS)
    if len(frames) != whole.pixels.frames:
        raise ValueError(f"{whole.pixels.frames} frames are declared and {len(frames)} are described")
    common = shared[0] if shared else Dataset()
    return [_frame_header(whole, k, frame, common) for k, frame in enumerate(frames)]


def _frame_header(whole: Header, k: int, frame: Dataset, common: Dataset) -> Header:
    group = _group_getter(frame, common)
    measures, values, details = group(PIXEL_MEASURES), group(VALUE_TRANSFORMATION), group(RAY_DETAILS)
    exposure, window, content = group(EXPOSURE), group(WINDOW), group(FRAME_CONTENT)
    thickness = finite(measures, 0x00180050)
    centre, width = finite(window, 0x00281050), finite(window, 0x00281051)
    return replace(
        whole,
        sop_instance=f"{whole.sop_instance} frame {k + 1}",
        image_type=tuple(value.upper() for value in codes(group(FRAME_TYPE), 0x00089007)) or whole.image_type,
        pixels=_frame_pixels(whole.pixels, k),
        orientation=numbers(group(PLANE_ORIENTATION), 0x00200037),
        position_mm=numbers(group(PLANE_POSITION), 0x00200032),
        pixel_spacing_mm=numbers(measures, 0x00280030),
        thickness_mm=thickness if thickness is not None and thickness > 0 else None,
        slope=number(values, 0x00281053),
        intercept=number(values, 0x00281052),
        rescale_type=code(values, 0x00281054),
        acquisition=str(content[0x00209156].value) if 0x00209156 in content else whole.acquisition,
        kvp=finite(details, 0x00180060),
        current_ma=real(exposure, 0x00189330),
        exposure_mas=real(exposure, 0x00189332),
        kernel=code(group(RECONSTRUCTION), 0x00181210),
        phase=code(content, 0x00209128) if 0x00209128 in content else whole.phase,
        window=(centre, width) if centre is not None and width is not None and width >= 1 else whole.window,
    )


def _frame_pixels(pixels: Pixels, k: int) -> Pixels:
    """Uncompressed frames follow each other without gaps; where compressed ones begin is found when they are read."""
    if pixels.length is None or pixels.offset is None:
        return replace(pixels, frame=k)
    size = pixels.rows * pixels.columns * pixels.bits_allocated // 8
    return replace(pixels, frame=k, offset=pixels.offset + k * size, length=min(max(pixels.length - k * size, 0), size))


def _items(dataset: Dataset, tag: int) -> list[Dataset]:
    return list(dataset[tag].value or []) if tag in dataset else []


def _group_getter(frame: Dataset, common: Dataset) -> Callable[[int], Dataset]:
    """What a frame says itself goes before what is said for all frames."""

    def get(tag: int) -> Dataset:
        items = _items(frame, tag) or _items(common, tag)
        return items[0] if items else Dataset()

    return get
