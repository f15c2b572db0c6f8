"""A finished picture and the marks that belong on it.

Marks are neutral shapes in the picture's own pixel coordinates: x to the right, y down, (0, 0) the outer corner
of the top left pixel. The PDF draws them as vectors, the image writer draws them into pixels.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

Point = tuple[float, float]


@dataclass(frozen=True)
class Stroke:
    """An open or closed line through ``points``. ``role`` chooses colour and weight: "scale", "outline", "cross"."""

    points: tuple[Point, ...]
    role: Literal["scale", "outline", "cross"]
    closed: bool = False


@dataclass(frozen=True)
class Caption:
    """A short text at a point.

    ``align`` says which part of the text is at the point: left/centre/right, a hyphen, top/middle/bottom.
    """

    at: Point
    text: str
    role: Literal["letter", "scale", "number"]
    align: str = "centre-middle"


Mark = Stroke | Caption


@dataclass(frozen=True)
class Key:
    """How values became grey or colour.

    ``window`` is (centre, width) for grey pictures; ``colours`` lists (label, (r, g, b) 0..255) for rendered ones.
    """

    window: tuple[float, float] | None = None
    colours: tuple[tuple[str, tuple[int, int, int]], ...] = ()


@dataclass(frozen=True)
class View:
    """One picture.

    Parameters
    ----------
    id : stable name, also of the image file, such as ``render-anterior``.
    kind : "render", "section", "projection".
    title : what it is, a few words. caption : direction, place, window and scale in plain sentences.
    pixels : shape (height, width) or (height, width, 3), uint8 sRGB.
    mm_per_pixel : the same in both directions, at the object.
    marks : scale bar, orientation letters, outlines. They never lie over the object's centre.
    """

    id: str
    kind: Literal["render", "section", "projection"]
    title: str
    caption: str
    pixels: NDArray[np.uint8]
    mm_per_pixel: float
    marks: tuple[Mark, ...]
    key: Key
