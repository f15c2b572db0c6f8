"""Sentences that say which boundary parts outside, material, void and inclusion in this run."""

from __future__ import annotations

import numpy as np

from tomofolio.body.result import Body
from tomofolio.fitness.result import Fitness
from tomofolio.measure.seeds import FALSE_CALL_DEVIATIONS, SMALLEST_SHARE, noise_of
from tomofolio.ranges.result import Interval, Ranges
from tomofolio.volume import Volume


def boundaries_statement(volume: Volume, ranges: Ranges, body: Body, fitness: Fitness) -> tuple[str, ...]:
    """Plain sentences with the values of this run and their unit, one thought each."""
    symbol = volume.unit.symbol
    unit = f" {symbol}" if symbol else ""
    background = ranges.background
    if body.threshold is None or background is None:
        return (
            "The scan shows no background: every voxel that is data counts as material and nothing as outside; neither "
            "voids nor inclusions are told from it.",
            *_between_materials(ranges, unit),
            _CUT,
        )
    threshold = _number(body.threshold, ranges)
    interval = _within(background.upper_95, ranges, unit)
    contrast = abs(ranges.main.peak - background.peak)
    noise = noise_of(fitness, volume.grid.spacing_mm, contrast)
    least = max(FALSE_CALL_DEVIATIONS * noise.sd_of_mean_of_27, SMALLEST_SHARE * contrast)
    level = f"{_number(least, ranges)}{unit}"
    reach = (2 * noise.blur_vox + 1) * np.array(volume.grid.spacing_mm)
    names = ("slices", "rows", "columns")
    reaches = ", ".join(f"{r:.3g} mm across the {name}" for r, name in zip(reach, names, strict=True))
    known = "" if fitness.blur_sigma_axes_mm is not None else " (taken for one voxel, since the blur is not known)"
    return (
        f"Outside is what lies below {threshold}{unit}{interval} and reaches the border of the scan without crossing "
        "material; bores and cavities that are open to the outside belong to it.",
        f"Material is what lies at or above {threshold}{unit}; the part's volume holds the material of the object, its "
        "inclusions with it, without closed voids and without what was left out.",
        *_between_materials(ranges, unit),
        "In a band around the outside surface a voxel counts by the share of material that its value tells, between "
        "the levels beside the surface, so that blur does not move the surface; near denser material, voids and things "
        "left out the count stands.",
        f"A void is darker than the material around it by more than noise can be: the mean of 3 × 3 × 3 voxels lies "
        f"more than {level} below the local level, which is the larger of {FALSE_CALL_DEVIATIONS:g} standard "
        f"deviations of such means and {100 * SMALLEST_SHARE:g} % of the contrast, {_number(contrast, ranges)}{unit}. "
        "It lies inside the object, and it is closed where it does not reach the outside.",
        "The best estimate of a void's volume is its missing grey value over the contrast; beside it stands the count "
        "of voxels past half-way between the local material and the background.",
        f"An inclusion is brighter than the material around it by the same {level}; its volume is the surplus of grey "
        "value over its own contrast.",
        "Spots nearer to the outside than its blurred edge reaches, 2 σ and one voxel, are not looked for: "
        f"{reaches}{known}.",
        "A void that reaches the outside is part of the outside: it is neither listed nor in the sums.",
        _CUT,
    )


_CUT = (
    "Where the border of the scan cuts the object, what lies beyond is not measured: the cut is no surface, and the "
    "volume ends there."
)


def _between_materials(ranges: Ranges, unit: str) -> list[str]:
    """One sentence for every boundary that is not the background's."""
    sentences = []
    for lower, upper in zip(ranges.items[:-1], ranges.items[1:], strict=True):
        if lower.background or upper.lower is None:
            continue
        value, interval = _number(upper.lower, ranges), _within(upper.lower_95, ranges, unit)
        sentences.append(
            f"{lower.name or lower.id} ends and {upper.name or upper.id} begins at {value}{unit}{interval}."
        )
    return sentences


def _within(interval: Interval | None, ranges: Ranges, unit: str) -> str:
    if interval is None:
        return ""
    low, high = (_number(end, ranges) for end in interval)
    return f" (95 % interval {low} to {high}{unit})"


def _number(value: float, ranges: Ranges) -> str:
    """Digits that matter: down to a thousandth of the distance between the outermost peaks."""
    reach = abs(ranges.items[-1].peak - ranges.items[0].peak) or abs(value) or 1.0
    decimals = int(np.clip(np.ceil(-np.log10(reach / 1000)), 0, 12))
    return f"{value:.{decimals}f}".replace("-", "−")
