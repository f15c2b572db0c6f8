"""What the reader of the report should know about the ranges."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from tomofolio.ranges.materials import Settled
from tomofolio.ranges.mixture import Mixture
from tomofolio.ranges.peaks import Peak
from tomofolio.remarks import Remark, Severity
from tomofolio.volume import Unit

#: A peak is flat when its standard deviation is less than this part of what a normal density with its top has.
FLAT = 0.85
#: From this share of the smaller material's voxels on the wrong side, two ranges overlap.
OVERLAP = 0.05


def remarks_about(
    settled: Settled,
    peaks_seen: list[Peak],
    model: Mixture,
    boundaries: NDArray[np.float64],
    unit: Unit,
    saturated: bool,
) -> tuple[Remark, ...]:
    """Remarks on ranges that overlap, were joined, or have no peak of their own."""
    remarks = []
    if len(settled.groups) == 1:
        text = "The histogram shows one range: the values do not part materials or tissues."
        remarks.append(Remark("ranges-single", Severity.NOTE, text))
    for n, group in enumerate(settled.groups):
        peaks = ", ".join(f"{model.mean[i]:.4g}" for i in group.members if i != group.lead)
        lead, name = f"{model.mean[group.lead]:.4g} {unit.symbol}".rstrip(), f"R{n + 1}"
        if group.reason == "packing":
            text = f"Faint things beside the object (peaks at {peaks}) are counted with the background around {lead}."
            remarks.append(Remark("ranges-packing-joined", Severity.NOTE, text))
        elif group.reason == "below":
            text = f"Values below the background's peak (at {peaks}) are counted with the background around {lead}."
            remarks.append(Remark("ranges-below-background", Severity.NOTE, text))
        elif group.reason == "continuum":
            text = (
                f"{name} has no single peak: its values vary more than the noise, so its lower boundary is uncertain."
            )
            remarks.append(Remark("ranges-continuum", Severity.CAUTION, text))
        elif group.reason == "uneven":
            text = f"{name} shows more than one peak ({peaks} beside {lead}), too near each other to be told apart."
            remarks.append(Remark("ranges-uneven", Severity.CAUTION, text))
        elif group.reason == "many":
            text = f"{name} holds a smaller peak (at {peaks}) that is not reported as a range of its own."
            remarks.append(Remark("ranges-many", Severity.NOTE, text))
        if peaks_seen[group.lead].shape < FLAT and group.reason != "continuum":
            text = f"The peak of {name} is flat: uneven values, or two materials too near each other to be told apart."
            remarks.append(Remark("ranges-flat-peak", Severity.NOTE, text))
    if saturated:
        name = f"R{len(settled.groups)}"
        text = f"{name} is cut off where the stored values end: its true peak is higher, and so is its lower boundary."
        remarks.append(Remark("ranges-saturated", Severity.CAUTION, text))
    for n, boundary in enumerate(boundaries):
        a, b = settled.groups[n].lead, settled.groups[n + 1].lead
        smaller = max(min(model.weight[a], model.weight[b]), 1e-12)
        wrong = model.weight[a] * ndtr((model.mean[a] - boundary) / model.spread[a])
        wrong += model.weight[b] * ndtr((boundary - model.mean[b]) / model.spread[b])
        if wrong > OVERLAP * smaller and settled.groups[n + 1].reason != "continuum":
            percent = min(100.0, 100 * wrong / smaller)
            text = f"R{n + 1} and R{n + 2} overlap: of the smaller one about {percent:.0f} % lie on the wrong side."
            remarks.append(Remark("ranges-overlap", Severity.CAUTION, text))
    return tuple(remarks)
