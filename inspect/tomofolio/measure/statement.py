"""Which boundary parts void, outside, material and inclusion in this run, in plain sentences."""

from __future__ import annotations

from tomofolio.body.result import Body
from tomofolio.fitness.detection import FALSE_CALL_DEVIATIONS, SMALLEST_SHARE
from tomofolio.fitness.result import Fitness
from tomofolio.measure.estimate import LARGEST_FITTED_VOX
from tomofolio.measure.patches import OWN_SIGMA
from tomofolio.ranges.result import Ranges
from tomofolio.volume import Volume


def boundaries_statement(volume: Volume, ranges: Ranges, body: Body, fitness: Fitness) -> tuple[str, ...]:
    """Sentences with the values and the unit of this run; empty where the scan shows no background."""
    background = ranges.background
    if background is None or body.threshold is None:
        return ()
    unit = volume.unit.symbol
    main = ranges.main
    half = (main.peak + background.peak) / 2
    blur = f" ({2 * fitness.blur_sigma_mm:.3g} mm and one voxel here)" if fitness.blur_sigma_mm else ""
    return (
        f"Outside is what lies below {body.threshold:.5g} {unit} and reaches the border of the scan through voxels "
        "that share a face. Material is what lies at or above it and belongs to the object.",
        "A void is a place inside the object that is darker than the material around it: the mean of 3 × 3 × 3 voxels "
        f"differs from the local level by more than {FALSE_CALL_DEVIATIONS:g} standard deviations of such means and by "
        f"more than {100 * SMALLEST_SHARE:g} % of the contrast. It is closed when it does not reach the outside; a "
        "pocket that does is part of the outside and is not listed.",
        "An inclusion is found the same way where the object is brighter. A brighter region that reaches the outside "
        "surface is a second material, not an inclusion.",
        f"Places nearer to the outside than two σ of the edge blur and one voxel{blur} are not looked at.",
        "Volume is the missing (or surplus) grey value, summed to "
        f"{OWN_SIGMA:g} σ of the blur beyond the half-way surface, over the difference between material and air "
        f"(peaks {main.peak:.5g} and {background.peak:.5g} {unit}); up to {LARGEST_FITTED_VOX:g} voxels across a "
        "blurred sphere is fitted where it describes the voxels.",
        "Volume by threshold counts the voxels past half-way between the local material and air (about "
        f"{half:.5g} {unit}); it is too small for small voids.",
        "CT sees attenuation, not emptiness: a weakly attenuating inclusion (sand, flux, oxide) looks like a void.",
    )
