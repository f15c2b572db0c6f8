"""What was done, in sentences, stage by stage."""

from __future__ import annotations

from tomofolio.report.setting import Setting


def method_sections(setting: Setting) -> list[tuple[str, list[str]]]:
    """Title and paragraphs of every stage that took part."""
    words = setting.words
    return [
        (
            "Reading",
            [
                "The slices are sorted by their recorded positions. Value = slope × stored number + intercept, for "
                "each slice. Spacing, uneven gaps, tilt and orientation stay as recorded; nothing is resampled before "
                "it is measured."
            ],
        ),
        (
            "Ranges",
            [
                "The ranges come from this scan's own histogram and from no table. Peaks are sought at places where "
                "the values are uniform; pure components (Gaussian densities) and the mixed voxels between neighbours "
                "(Santago and Gage 1993) are fitted to the histogram of all voxels, and boundaries follow from the "
                "fit. Their intervals: from leaving out one part of the scan after the other."
            ],
        ),
        (
            "Object",
            [
                "Material is what lies above the boundary between background and the next range. The "
                f"{words.object} is its large, thick piece with what belongs to it; thin sheets through the whole scan "
                "(table, holder) and small loose pieces are left out and listed."
            ],
        ),
        (
            "Fitness",
            [
                "Noise: standard deviation in small blocks deep in the main range, slow trends taken off. Blur: from "
                "the object's own edges, after the way of ASTM E1695; the modulation transfer function is that of the "
                "Gaussian which fits them."
            ],
        ),
        ("Volumes", _volumes(setting)),
        (
            "Pictures",
            [
                "Rays are cast through the volume by emission and absorption, front to back (Levoy 1988), in parallel "
                "projection; opacity and colour follow from the ranges. Sections are sampled linearly at the true "
                "geometry; projections show the largest value along each ray."
            ],
        ),
        (
            "Intervals",
            [
                "Every interval covers 95 %. It holds what the scan can tell: noise, threshold, blur. It does not hold "
                "a wrong voxel size (1 % in length is 3 % in volume) or artefacts."
            ],
        ),
    ]


def _volumes(setting: Setting) -> list[str]:
    texts = ["Volumes are sums over voxels, each with the volume that its own slice distances give it."]
    if setting.measures_voids:
        texts.append(
            "Voids and inclusions are sought as deficits or surpluses against the local level of the material. Their "
            "volume is the missing (or surplus) grey value over the local contrast, so that blur does not shrink them; "
            "small ones are fitted as blurred spheres. The count of voxels past the half-way value is given beside it. "
            "Porosity = voids / (part + voids) × 100, closed voids only."
        )
    return texts
