"""Tables that turn a value into colour and opacity, made from the ranges of the scan."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tomofolio.body.result import Body
from tomofolio.ranges.result import Ranges, ValueRange
from tomofolio.render.colours import decode_srgb, ordered_colours
from tomofolio.volume import Volume

ENTRIES = 4096

#: How fast density grows as a range gets rarer.
RARITY_POWER = 2.6
#: Optical depth of the most frequent range over the object's size, and opacity of one crossing of the outer surface:
#: where there is one material, which should read as a solid, and where it encloses others that should be seen.
DEPTH_ALONE, SURFACE_ALONE = 1.1, 0.36
DEPTH_ENCLOSING, SURFACE_ENCLOSING = 0.6, 0.20
#: From this share of the object on, a material begins to count as alone (a few small inclusions hide nothing).
ALONE_FROM = 0.96
#: No matter gets denser than this optical depth per voxel: it is opaque within three voxels and stays smooth.
DENSEST_PER_VOXEL = 1.2
#: A sharp edge takes about so many voxels from one material to the other.
EDGE_VOXELS = 2.5


@dataclass(frozen=True)
class TransferTable:
    """Colour and opacity for values on an equal-step axis.

    Parameters
    ----------
    first, last : values of the first and the last entry, in the scan's unit; beyond them the end entries go on.
    density_per_mm : shape (entries,): opacity of a length L is 1 − exp(−density · L).
    colour : shape (entries, 3): linear-light RGB, 0 to 1.
    range_colours : (range id, sRGB 0..255) for the key.
    empty : value that stands in for hidden voxels and for what lies outside the scan; None is ``first``.
    edge_per_mm : (weak, full) change of the value per mm at which light begins to shape a surface and does so in
        full; below it there is only noise. None: always in full.
    surface_from_per_mm : density from which matter counts as a surface and is shaped by light; thinner matter is
        lit evenly.
    """

    first: float
    last: float
    density_per_mm: NDArray[np.float32]
    colour: NDArray[np.float32]
    range_colours: tuple[tuple[str, tuple[int, int, int]], ...]
    empty: float | None = None
    edge_per_mm: tuple[float, float] | None = None
    surface_from_per_mm: float = 0.0


def make_tables(ranges: Ranges, *, body: Body | None = None, volume: Volume | None = None) -> TransferTable:
    """A table from the ranges: background clear, frequent values faint, sparse values strong, surfaces visible.

    The bulk of every range is a plateau, so that noise does not flicker and rays may cross it in one step. Its
    density falls with its share of the object and with the object's size; the crossing from background to material
    gets a density of its own, set so that one crossing has a given opacity (Levoy 1988: show the boundaries).

    Parameters
    ----------
    ranges : of the scan.
    body, volume : give the size of object and voxel; without them 100 mm and 1 mm are taken.
    """
    size_mm, voxel_mm = _sizes(body, volume)
    centres = ranges.histogram.centres
    first, last = (float(centres[0]), float(centres[-1])) if volume is None else volume.value_limits
    peaks = [item.peak for item in ranges.items]
    first, last = min(first, *peaks), max(last, *peaks)
    last = last if last > first else first + 1.0
    values = np.linspace(first, last, ENTRIES)
    matter = [item for item in ranges.items if not item.background]
    total = sum(item.pure_share for item in matter) or 1.0
    colours = ordered_colours(len(matter))
    largest = max((item.pure_share / total for item in matter), default=1.0)
    alone = min(max((largest - ALONE_FROM) / (1 - ALONE_FROM), 0.0), 1.0)
    bulk_depth = DEPTH_ENCLOSING + alone * (DEPTH_ALONE - DEPTH_ENCLOSING)
    surface_opacity = SURFACE_ENCLOSING + alone * (SURFACE_ALONE - SURFACE_ENCLOSING)
    bulk = _bulk_densities(matter, total, bulk_depth / size_mm, DENSEST_PER_VOXEL / voxel_mm)
    linear = {item.id: decode_srgb(np.array(c) / 255) for item, c in zip(matter, colours, strict=True)}
    density = np.zeros(ENTRIES)
    colour = np.zeros((ENTRIES, 3))
    previous: ValueRange | None = None
    for item in ranges.items:
        level = bulk.get(item.id, 0.0)
        shade = linear.get(item.id, np.zeros(3))
        if previous is None:
            density[:], colour[:] = level, shade
        else:
            low, high = _crossing(previous, item)
            rise = _smoothstep((values - low) / (high - low))
            before = bulk.get(previous.id, 0.0)
            density += rise * (level - before)
            if not previous.background and not item.background:
                colour += rise[:, None] * (shade - linear[previous.id])
            else:
                if previous.background:
                    colour[values >= low] = shade
                wanted = float(-np.log1p(-surface_opacity))
                density += _bump(values, low, high) * _peak_density(wanted, previous, item, low, high, voxel_mm)
        previous = item
    return TransferTable(
        first=first,
        last=last,
        density_per_mm=np.maximum(density, 0.0).astype(np.float32),
        colour=colour.astype(np.float32),
        range_colours=tuple((item.id, c) for item, c in zip(matter, colours, strict=True)),
        empty=first if ranges.background is None else ranges.background.peak,
        edge_per_mm=_edges(ranges, volume, voxel_mm),
        surface_from_per_mm=1.5 * bulk.get(ranges.main.id, 0.0),
    )


def _bulk_densities(matter: list[ValueRange], total: float, frequent: float, densest: float) -> dict[str, float]:
    """Density of every range: the rarer it is together with all that is denser, the stronger.

    Counting the denser ranges in keeps density rising with the value, so a thin outer range, however rare, never hides
    what it encloses.
    """
    densities, share = {}, 0.0
    for item in reversed(matter):
        share += item.pure_share / total
        densities[item.id] = min(frequent / max(share, 1e-3) ** RARITY_POWER, densest)
    return densities


def _sizes(body: Body | None, volume: Volume | None) -> tuple[float, float]:
    """Mean size of the object and of the voxel in mm (geometric means over the axes)."""
    if volume is None:
        return 100.0, 1.0
    spacing = np.array(volume.grid.spacing_mm)
    extent = np.array(volume.shape, dtype=float)
    if body is not None:
        extent = np.array([max(part.stop - part.start, 1) for part in body.box], dtype=float)
    return float(np.prod(extent * spacing) ** (1 / 3)), float(np.prod(spacing) ** (1 / 3))


def _crossing(low: ValueRange, high: ValueRange) -> tuple[float, float]:
    """The values that belong to neither bulk: around the boundary, clear of the noise of both peaks."""
    boundary = high.lower if high.lower is not None else (low.peak + high.peak) / 2
    start = max(low.peak + 4.5 * low.spread, boundary - 0.5 * (boundary - low.peak))
    stop = min(high.peak - 4.5 * high.spread, boundary + 0.7 * (high.peak - boundary))
    narrow = 0.05 * (high.peak - low.peak)
    return min(start, boundary - narrow), max(stop, boundary + narrow)


def _smoothstep(x: NDArray[np.float64]) -> NDArray[np.float64]:
    x = np.clip(x, 0.0, 1.0)
    return x * x * (3.0 - 2.0 * x)


def _bump(values: NDArray[np.float64], low: float, high: float) -> NDArray[np.float64]:
    """A raised cosine from low to high, 1 in the middle."""
    x = np.clip((values - low) / (high - low), 0.0, 1.0)
    return 0.5 - 0.5 * np.cos(2 * np.pi * x)


def _peak_density(
    wanted: float, low_range: ValueRange, high_range: ValueRange, low: float, high: float, voxel_mm: float
) -> float:
    """Height of a bump whose crossing has the optical depth ``wanted``: a bump is half as thick as its base."""
    edge_mm = EDGE_VOXELS * voxel_mm * (high - low) / (high_range.peak - low_range.peak)
    return min(wanted / (0.5 * edge_mm), DENSEST_PER_VOXEL / voxel_mm)


def _edges(ranges: Ranges, volume: Volume | None, voxel_mm: float) -> tuple[float, float]:
    """Slopes of the value that are noise, and that are surely a surface."""
    finest = voxel_mm if volume is None else min(volume.grid.spacing_mm)
    main = ranges.main
    other = ranges.background or min(ranges.items, key=lambda item: item.peak)
    contrast = abs(main.peak - other.peak) or main.spread or 1.0
    soft = min(0.8 * main.spread / finest, 0.10 * contrast / voxel_mm)
    return soft, max(2.2 * soft, 0.12 * contrast / voxel_mm)
