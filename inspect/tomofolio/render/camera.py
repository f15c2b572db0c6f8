"""The orthographic camera: from pixels to rays and from positions to pixels."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Camera:
    """A parallel projection; every pixel sees one ray along the direction of sight.

    Parameters
    ----------
    sight : direction in which the viewer looks, LPS.
    up : what shall point upwards in the picture, LPS; only its part across ``sight`` counts.
    centre_mm : position that lies in the middle of the picture, LPS.
    mm_per_pixel : the same in both directions.
    width, height : of the picture in pixels.
    """

    sight: tuple[float, float, float]
    up: tuple[float, float, float]
    centre_mm: tuple[float, float, float]
    mm_per_pixel: float
    width: int
    height: int

    def __post_init__(self) -> None:
        if np.linalg.norm(np.cross(self.sight, self.up)) < 1e-9:
            raise ValueError("the direction of sight and the upward direction must not be parallel")

    @cached_property
    def axes(self) -> Array:
        """Shape (3, 3): rows are the unit vectors right, down and away from the viewer, LPS."""
        away = np.array(self.sight, dtype=np.float64)
        away /= np.linalg.norm(away)
        right = np.cross(away, np.array(self.up, dtype=np.float64))
        right /= np.linalg.norm(right)
        return np.stack((right, np.cross(away, right), away))

    @cached_property
    def first_pixel_mm(self) -> Array:
        """Shape (3,): the centre of the top left pixel, in the plane through ``centre_mm``."""
        right, down, _ = self.axes
        across, along = (self.width - 1) / 2, (self.height - 1) / 2
        return np.array(self.centre_mm) - self.mm_per_pixel * (across * right + along * down)

    def to_pixel(self, position_mm: ArrayLike) -> Array:
        """Picture coordinates (x, y; the corner of the top left pixel is (0, 0)) of positions, shape (..., 3)."""
        steps = (np.asarray(position_mm, dtype=np.float64) - np.array(self.centre_mm)) @ self.axes[:2].T
        return steps / self.mm_per_pixel + np.array([self.width / 2, self.height / 2])

    def pixel_positions_mm(self) -> Array:
        """Shape (height, width, 3): centres of all pixels in the plane through ``centre_mm``, LPS."""
        right, down, _ = self.axes * self.mm_per_pixel
        x, y = np.arange(self.width)[None, :, None], np.arange(self.height)[:, None, None]
        return self.first_pixel_mm + x * right + y * down

    def framed(self, margin: int, foot: int) -> Camera:
        """The same view with a margin of pixels on all sides, and ``foot`` more below (the picture keeps its place)."""
        down = self.axes[1]
        shift = foot / 2 * self.mm_per_pixel * down
        centre = np.array(self.centre_mm) + shift
        return replace(
            self,
            centre_mm=(float(centre[0]), float(centre[1]), float(centre[2])),
            width=self.width + 2 * margin,
            height=self.height + 2 * margin + foot,
        )
