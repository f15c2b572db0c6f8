"""Figures measured on the object, each with its 95 % interval or None where it has none."""

from __future__ import annotations

from dataclasses import dataclass

from tomofolio.remarks import Remark

Interval = tuple[float, float]
Position = tuple[float, float, float]


@dataclass(frozen=True)
class RangeFigures:
    """What one value range amounts to, over all voxels that are data and not excluded.

    ``share`` is the part of that volume (0 to 1); ``mean`` and ``sd`` are of the voxels between the boundaries;
    ``regions`` counts 6-connected regions.
    """

    id: str
    volume_mm3: float
    volume_mm3_95: Interval | None
    share: float
    mean: float | None
    sd: float | None
    regions: int
    largest_region_mm3: float


@dataclass(frozen=True)
class PartFigures:
    """The material of the object with its inclusions, without its closed voids."""

    volume_mm3: float
    volume_mm3_95: Interval | None
    surface_mm2: float | None
    mass_g: float | None = None
    mass_g_95: Interval | None = None


@dataclass(frozen=True)
class Spot:
    """One void or inclusion; the fields are those of the data file's ``voids.items``.

    ``box`` is the index box (slice, row, column: first, past-the-last) for close-ups.
    """

    id: str
    volume_mm3: float
    volume_mm3_95: Interval | None
    threshold_volume_mm3: float
    equivalent_diameter_mm: float
    feret_max_mm: float | None
    sphericity: float | None
    position_mm: Position
    ligament_mm: float | None
    nearest_mm: float | None
    contrast: float | None
    open: bool
    box: tuple[tuple[int, int], tuple[int, int], tuple[int, int]]


@dataclass(frozen=True)
class Densest:
    """The reference volume that holds the most void."""

    porosity_percent: float
    reference_volume_mm3: float
    position_mm: Position


@dataclass(frozen=True)
class Spots:
    """All voids (or all inclusions), largest first. The sums are over closed ones only.

    ``porosity_percent`` is total / (part + total) × 100: for voids the porosity, for inclusions their share.
    """

    count: int
    total_mm3: float
    total_mm3_95: Interval | None
    porosity_percent: float | None
    porosity_percent_95: Interval | None
    densest: Densest | None
    items: tuple[Spot, ...]


@dataclass(frozen=True)
class Findings:
    """Everything that was measured. ``voids`` and ``inclusions`` are None where they were not looked for."""

    ranges: tuple[RangeFigures, ...]
    part: PartFigures | None
    voids: Spots | None
    inclusions: Spots | None
    remarks: tuple[Remark, ...] = ()
