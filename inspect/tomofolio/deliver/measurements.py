"""The run's figures as one JSON document, schema ``tomofolio-measurements-1``."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping, Sequence
from dataclasses import asdict
from typing import Any

import numpy as np

from tomofolio.case import Case
from tomofolio.measure.result import Spot, Spots

SCHEMA = "tomofolio-measurements-1"


def measurements(case: Case) -> dict[str, Any]:
    """All figures of a run: finite numbers or None, lengths mm, areas mm², volumes mm³, positions LPS mm."""
    return _plain(
        {
            "schema": SCHEMA,
            "tool": {"name": "tomofolio", "version": case.provenance.tool_version},
            "series": _series(case),
            "unit": {
                "quantity": case.volume.unit.quantity,
                "symbol": case.volume.unit.symbol,
                "basis": case.volume.unit.basis.value,
            },
            "fitness": _fitness(case),
            "ranges": _ranges(case),
            "part": _part(case),
            "voids": _spots(case.findings.voids),
            "inclusions": _spots(case.findings.inclusions),
            "provenance": {
                "parameters": dict(case.provenance.parameters),
                "libraries": dict(case.provenance.libraries),
                "created": case.provenance.created,
            },
        }
    )


def measurements_text(case: Case) -> str:
    """The document as UTF-8 text; the same case gives the same text."""
    return json.dumps(measurements(case), ensure_ascii=False, allow_nan=False, indent=2) + "\n"


def _series(case: Case) -> dict[str, Any]:
    grid = case.volume.grid
    return {
        "uid": case.series.uid if case.keep_identity else None,
        "pixels_sha256": case.provenance.pixels_sha256,
        "shape": grid.shape,
        "spacing_mm": grid.spacing_mm,
        "slice_positions_mm": grid.slice_positions_mm,
        "origin_mm": grid.origin_mm,
        "direction": grid.direction,
    }


def _fitness(case: Case) -> dict[str, Any]:
    fitness = case.fitness
    keys = ["noise", "contrast", "cnr", "blur_sigma_mm", "mtf10_per_mm"]
    keys += ["detectable_diameter_mm", "measurable_diameter_mm"]
    table: dict[str, Any] = {key: getattr(fitness, key) for key in keys}
    every = (case.series, case.ranges, case.body, fitness, case.findings)
    table["findings"] = [
        {"code": remark.code, "severity": remark.severity.value, "text": remark.text}
        for stage in every
        for remark in stage.remarks
    ]
    return table


def _ranges(case: Case) -> list[dict[str, Any]]:
    rows = []
    for item, figures in zip(case.ranges.items, case.findings.ranges, strict=True):
        row = asdict(figures)
        row.update(
            name=item.name,
            named_by=item.named_by or None,
            lower=item.lower,
            lower_95=item.lower_95,
            upper=item.upper,
            upper_95=item.upper_95,
            peak=item.peak,
            spread=item.spread,
            background=item.background,
        )
        rows.append(row)
    return rows


def _part(case: Case) -> dict[str, Any] | None:
    if case.findings.part is None:
        return None
    return {**asdict(case.findings.part), "excluded": [asdict(thing) for thing in case.body.excluded]}


def _spots(spots: Spots | None) -> dict[str, Any] | None:
    if spots is None:
        return None
    table = asdict(spots)
    table["items"] = [_spot(spot) for spot in spots.items]
    return table


def _spot(spot: Spot) -> dict[str, Any]:
    row = asdict(spot)
    del row["box"]  # an aid for close-ups, no measurement
    return row


def _plain(value: Any) -> Any:
    """Arrays to lists, NumPy scalars to Python numbers, what is not finite to None."""
    if isinstance(value, Mapping):
        return {str(key): _plain(entry) for key, entry in value.items()}
    if isinstance(value, np.ndarray):
        return _plain(value.tolist())
    if isinstance(value, (str, bool)) or value is None:
        return value
    if isinstance(value, np.generic):
        return _plain(value.item())
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, int):
        return value
    if isinstance(value, Sequence):
        return [_plain(entry) for entry in value]
    raise TypeError(f"{type(value).__name__} has no place in the data file")
