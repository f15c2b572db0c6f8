"""Colours: the sRGB encoding, linear-light compositing on the ground, and the house palette.

Light adds up in linear light, so everything is composited there and encoded once at the end, exactly as
IEC 61966-2-1 defines sRGB.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

#: Ground of rendered pictures and of everything outside a scan, sRGB 0..255: paper, a little warmer than white.
GROUND = (250, 249, 246)

#: Ordered from low to high values: lightness falls (so the order survives a grey print) while the hue walks from cool
#: to warm, the one axis that all common colour vision deficiencies keep (Okabe & Ito 2008, from memory).
PALETTE = ((186, 206, 216), (96, 150, 172), (196, 112, 44), (122, 40, 60))


def encode_srgb(linear: ArrayLike) -> NDArray[np.float64]:
    """Linear light 0..1 to sRGB 0..1, IEC 61966-2-1; any shape, values beyond 0..1 are clipped."""
    linear = np.clip(np.asarray(linear, dtype=np.float64), 0.0, 1.0)
    return np.where(linear <= 0.0031308, 12.92 * linear, 1.055 * linear ** (1 / 2.4) - 0.055)


def decode_srgb(encoded: ArrayLike) -> NDArray[np.float64]:
    """sRGB 0..1 to linear light 0..1, the inverse of `encode_srgb`."""
    encoded = np.asarray(encoded, dtype=np.float64)
    return np.where(encoded <= 0.04045, encoded / 12.92, ((encoded + 0.055) / 1.055) ** 2.4)


def linear_ground() -> NDArray[np.float64]:
    """Shape (3,): the ground in linear light."""
    return decode_srgb(np.array(GROUND) / 255)


def on_ground(rgba: NDArray[np.float32]) -> NDArray[np.uint8]:
    """Lay a premultiplied linear-light picture on the ground and encode it (Porter & Duff 1984, "over").

    Parameters
    ----------
    rgba : shape (height, width, 4), as `cast_rays` returns it.

    Returns
    -------
    shape (height, width, 3), sRGB.
    """
    light = rgba[..., :3] + (1.0 - rgba[..., 3:]) * linear_ground()
    return np.rint(encode_srgb(light) * 255).astype(np.uint8)


def ordered_colours(count: int) -> list[tuple[int, int, int]]:
    """``count`` sRGB colours along the palette, from low to high values.

    Few ranges take neighbouring colours around the middle of the palette, where they read best on the ground; more
    than the palette has are spaced evenly along it.
    """
    if count <= len(PALETTE):
        first = 0 if count > 2 else 1
        return list(PALETTE[first : first + count])
    knots = decode_srgb(np.array(PALETTE) / 255)
    at = np.linspace(0, len(PALETTE) - 1, count)
    linear = np.column_stack([np.interp(at, np.arange(len(PALETTE)), knots[:, c]) for c in range(3)])
    return [(int(r), int(g), int(b)) for r, g, b in np.rint(encode_srgb(linear) * 255)]
