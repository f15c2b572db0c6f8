"""The public step of this room."""

from __future__ import annotations

from tomofolio.body.result import Body
from tomofolio.fitness.result import Fitness
from tomofolio.measure.level import level_field
from tomofolio.measure.outside_surface import outside_points
from tomofolio.measure.part import part_figures
from tomofolio.measure.range_figures import range_figures
from tomofolio.measure.result import Findings, Spot
from tomofolio.measure.spots import find_spots, sum_up, total_sd_mm3
from tomofolio.ranges.result import Ranges
from tomofolio.remarks import Remark, Severity
from tomofolio.volume import Volume


def measure(volume: Volume, ranges: Ranges, body: Body, fitness: Fitness, *, look_for_voids: bool) -> Findings:
    """Measure ranges, part, voids and inclusions.

    Parameters
    ----------
    look_for_voids : False leaves voids and inclusions out (None in the result).

    Returns
    -------
    `Findings`, with remarks that say what could not be looked for.
    """
    figures = range_figures(volume, ranges, body)
    voids: tuple[Spot, ...] = ()
    inclusions: tuple[Spot, ...] = ()
    remarks: list[Remark] = []
    if look_for_voids and ranges.background is None:
        text = "Without background nothing says what an empty place looks like: no voids are measured."
        remarks.append(Remark("voids-need-background", Severity.CAUTION, text))
        look_for_voids = False
    if look_for_voids:
        field = level_field(volume, ranges, body)
        outside = volume.grid.to_mm(outside_points(volume, body))
        voids, inclusions = find_spots(volume, ranges, body, fitness, field, outside)
        text = (
            "Pockets that reach the outside are part of the outside: they are not listed and not in the sums. "
            "Voids nearer to the outside than the edge blur reaches (2 σ + 1 voxels) are not looked for."
        )
        remarks.append(Remark("open-pockets-not-listed", Severity.NOTE, text))
    part = part_figures(
        volume,
        ranges,
        body,
        fitness,
        closed_voids_mm3=sum(item.volume_mm3 for item in voids if not item.open),
        closed_voids_sd_mm3=total_sd_mm3(voids),
    )
    return Findings(
        ranges=figures,
        part=part,
        voids=sum_up(voids, part.volume_mm3, body, volume) if look_for_voids else None,
        inclusions=sum_up(inclusions, part.volume_mm3, body, volume) if look_for_voids else None,
        remarks=tuple(remarks),
    )
