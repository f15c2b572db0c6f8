"""The remarks of this room: stable codes, and one plain sentence each."""

from __future__ import annotations

from tomofolio.body.result import Body
from tomofolio.fitness.artefacts import Clipping, Cupping, Truncation
from tomofolio.fitness.blur import Blur
from tomofolio.fitness.noise import Noise
from tomofolio.remarks import Remark, Severity
from tomofolio.volume import Grid

_NOTE, _CAUTION, _STOP = Severity.NOTE, Severity.CAUTION, Severity.STOP

#: Common practice, no source: below this contrast-to-noise ratio single voxels cannot be told apart.
_LOW_CNR = 5.0
#: Share of the contrast up to which a background may be cleared without harm to the edges.
EDGES_CUT = 0.07


def about_noise(noise: Noise | None, contrast: float | None, cnr: float | None, step: float) -> list[Remark]:
    """What the noise, or its absence, means."""
    remarks = []
    if noise is None:
        text = "The noise could not be measured: no part of the main material is thick enough to be clear of its edges."
        remarks.append(Remark("noise-unknown", _CAUTION, text))
    elif noise.sd == 0:
        text = "The main material has no noise at all, so the values were smoothed, segmented or made up before."
        remarks.append(Remark("noise-absent", _CAUTION, text))
    elif step > 2 * noise.sd:
        text = f"The values come in steps of {step:.3g}, coarser than the noise, which limits every figure."
        remarks.append(Remark("values-coarse", _CAUTION, text))
    if contrast is None:
        text = "The scan shows no background, so contrast, blur and everything that rests on them is left out."
        remarks.append(Remark("background-missing", _CAUTION, text))
    if cnr is not None and cnr < _LOW_CNR:
        text = f"The contrast is only {cnr:.1f} times the noise; boundaries and small details are uncertain."
        remarks.append(Remark("noise-high", _CAUTION, text))
    return remarks


def about_blur(
    blur: Blur | None,
    contrast: float | None,
    clipping: Clipping,
    grid: Grid,
) -> list[Remark]:
    """How far the blur can be relied on."""
    if contrast is None:
        return []
    if blur is None:
        slices, rows, columns = grid.spacing_mm
        if slices > 1.5 * max(rows, columns):
            text = "The blur could not be measured along all axes: the slices are too far apart for the object's edges."
        else:
            text = "The blur could not be measured: the object has too few clean, nearly plane edges."
        return [Remark("blur-unknown", _CAUTION, text)]
    remarks = []
    if not all(blur.measured):
        names = [name for name, sure in zip(("slice", "row", "column"), blur.measured, strict=True) if not sure]
        text = (
            f"Few edges of the object face the {' and '.join(names)} direction; the blur along it is largely assumed."
        )
        remarks.append(Remark("blur-axis-assumed", _NOTE, text))
    if clipping.cut > EDGES_CUT:
        text = "The foot of every edge went with the cleared background; the blur rests on what is left of the edges."
        remarks.append(Remark("blur-edges-cut", _CAUTION, text))
    return remarks


def about_artefacts(
    clipping: Clipping, truncation: Truncation, cupping: Cupping | None, contrast: float | None
) -> list[Remark]:
    """Clipping, truncation and cupping."""
    remarks = []
    if clipping.cleared is not None:
        text = "The background has one single value: it was cleared before, and noise in air cannot be judged."
        remarks.append(Remark("background-cleared", _NOTE, text))
    elif clipping.low > 0:
        text = f"{_percent(clipping.low)} of the background lies at the lowest value: the scale is cut off below."
        remarks.append(Remark("values-clipped-low", _NOTE, text))
    if clipping.high > 0:
        text = f"{_percent(clipping.high)} of the object lies at the highest value: the scale is cut off above."
        remarks.append(Remark("values-clipped-high", _CAUTION, text))
    if truncation.sides > 0.002:
        text = "The object reaches the side of the scan: parts of it are missing, and values near the side are unsure."
        remarks.append(Remark("object-cut-at-sides", _CAUTION, text))
    if truncation.rim > 0.02:
        text = (
            "The object reaches the rim of the scanned circle: parts are missing, and values near the rim are unsure."
        )
        remarks.append(Remark("object-cut-at-rim", _CAUTION, text))
    ends = [name for name, share in (("first", truncation.first), ("last", truncation.last)) if share > 0.002]
    if ends:
        which = " and the ".join(ends)
        text = f"The object goes on beyond the {which} slice; its volume is that of the scanned part."
        remarks.append(Remark("object-cut-at-ends", _NOTE, text))
    if cupping is not None and contrast:
        share = cupping.rise / contrast
        if abs(share) > 0.015 and abs(cupping.rise) > 4 * cupping.error:
            how = "higher" if share > 0 else "lower"
            size = f"{_percent(abs(share))} of the contrast"
            text = f"Shading: the main material's values are {size} {how} at the rim than deep inside."
            remarks.append(Remark("cupping", _CAUTION if abs(share) > 0.05 else _NOTE, text))
    return remarks


def about_geometry(grid: Grid, body: Body) -> list[Remark]:
    """Spacing, and how many voxels the object has across; gaps and tilt are told by the intake."""
    remarks = []
    slices, rows, columns = grid.spacing_mm
    if grid.shape[0] > 1 and slices > 2 * max(rows, columns):
        ratio = slices / max(rows, columns)
        text = f"The slices are {ratio:.1f} times as far apart as the pixels; detail across the slices is lost."
        remarks.append(Remark("slices-far-apart", _CAUTION, text))
    across = min(cut.stop - cut.start for cut in body.box[1:])
    if across < 32:
        text = f"The object is only {across} pixels across; its surface and volume are coarse."
        remarks.append(Remark("object-coarse", _CAUTION, text))
    return remarks


def about_limits(
    detectable: float | None,
    measurable: float | None,
    cnr: float | None,
    blur: Blur | None,
) -> list[Remark]:
    """Why there is no smallest void."""
    if detectable is not None and measurable is not None:
        return []
    if cnr is None or blur is None:
        text = "The smallest void that can be found or measured is not stated: noise, contrast or blur is not known."
    else:
        text = "The noise is so strong that voids of any sensible size may be missed."
    return [Remark("smallest-void-unknown", _CAUTION, text)]


def _percent(share: float) -> str:
    """A share in per cent with two figures that count."""
    return f"{100 * share:.2g} %"
