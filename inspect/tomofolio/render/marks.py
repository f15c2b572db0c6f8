"""Marks that belong on a picture: scale bar, orientation letters, outlines; all made from the geometry alone."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike

from tomofolio.render.camera import Camera
from tomofolio.render.view import Caption, Mark, Stroke
from tomofolio.volume import Kind

#: A direction gets a second letter when it leans this much (sine of 20°) towards a second axis.
SECOND_LETTER_FROM = 0.342


def direction_letters(direction: ArrayLike, kind: Kind) -> str:
    """Name of a direction in LPS: "L", "LA" for patients (DICOM PS3.3 C.7.6.1.1.1), "+X", "+X −Y" for components.

    The strongest axis comes first; a second one is named where the direction leans towards it by 20° or more.
    """
    vector = np.asarray(direction, dtype=np.float64)
    vector = vector / np.linalg.norm(vector)
    order = sorted(range(3), key=lambda axis: (-round(abs(float(vector[axis])), 6), axis))
    named = [order[0]] + [axis for axis in order[1:2] if abs(vector[axis]) >= SECOND_LETTER_FROM]
    if kind is Kind.COMPONENT:
        return " ".join(("+" if vector[axis] > 0 else "−") + "XYZ"[axis] for axis in named)
    return "".join(("LPS" if vector[axis] > 0 else "RAI")[axis] for axis in named)


def orientation_letters(camera: Camera, kind: Kind, margin: float, foot: float) -> tuple[Caption, ...]:
    """Letters in the middle of the four margins: what lies to the left, right, top and bottom."""
    right, down, _ = camera.axes
    w, h, edge = camera.width, camera.height, 0.22 * margin
    middle = (h - foot) / 2
    return (
        Caption((edge, middle), direction_letters(-right, kind), "letter", "left-middle"),
        Caption((w - edge, middle), direction_letters(right, kind), "letter", "right-middle"),
        Caption((w / 2, edge), direction_letters(-down, kind), "letter", "centre-top"),
        Caption((w / 2, h - foot - edge), direction_letters(down, kind), "letter", "centre-bottom"),
    )


def round_length_mm(longest_mm: float) -> float:
    """Largest of 1, 2, 5 × 10ⁿ that is not longer."""
    power = 10.0 ** math.floor(math.log10(longest_mm) + 1e-9)
    for factor in (5.0, 2.0, 1.0):
        if factor * power <= longest_mm * (1 + 1e-9):
            return factor * power
    return power


def scale_bar(camera: Camera, margin: float, foot: float) -> tuple[Mark, ...]:
    """A bar of round length at the bottom left, at most a quarter of the width, with ticks and its length."""
    length_mm = round_length_mm(0.25 * (camera.width - 2 * margin) * camera.mm_per_pixel)
    length = length_mm / camera.mm_per_pixel
    x, y = margin, camera.height - foot * 0.62
    tick = max(foot * 0.14, 3.0)
    text = f"{length_mm:g} mm"
    return (
        Stroke(((x, y - tick), (x, y), (x + length, y), (x + length, y - tick)), "scale"),
        Caption((x + length / 2, y + tick * 0.7), text, "scale", "centre-top"),
    )
