"""The table of voids or inclusions, largest first."""

from __future__ import annotations

from collections.abc import Sequence

from tomofolio.measure.result import Spot
from tomofolio.report.numbers import decimals_for, figure, known, plain
from tomofolio.report.range_tables import MISSING
from tomofolio.report.setting import Setting
from tomofolio.report.style import SIZE_TABLE
from tomofolio.report.table import Column, DataTable

#: So many rows are printed; all are in the data file.
MOST_ROWS = 200


def spot_table(setting: Setting, spots: Sequence[Spot], decimals_mm: int) -> DataTable:
    """One row each.

    Parameters
    ----------
    decimals_mm : of positions and distances, from the voxel size: a tenth of a voxel is shown.
    """
    words = setting.words
    axes = "LPS" if words.axes[0][1] == "Left" else "XYZ"
    columns = [
        Column("No.", align="left", share=0),
        Column("Volume", "mm³"),
        Column("95 %\nfrom", "mm³"),
        Column("95 %\nto", "mm³"),
        Column("By\nthreshold", "mm³"),
        Column("Equiv.\ndiameter", "mm"),
        Column("Feret\ndiameter", "mm"),
        Column("Spheri-\ncity"),
        *(Column(axis, "mm") for axis in axes),
        Column(words.ligament.capitalize().replace(" ", "\n"), "mm"),
        Column("To the\nnearest", "mm"),
        Column(words.contrast.capitalize().replace(" ", "\n")),
    ]
    return DataTable(columns, [_row(spot, decimals_mm) for spot in spots], SIZE_TABLE - 1)


def _row(spot: Spot, decimals_mm: int) -> list[str]:
    interval = spot.volume_mm3_95
    decimals = max(decimals_for(spot.volume_mm3, interval), 0) if known(spot.volume_mm3) else 0
    ends = [plain(end, decimals) for end in interval] if interval is not None else [MISSING, MISSING]
    return [
        f"{spot.id} open" if spot.open else spot.id,
        plain(spot.volume_mm3, decimals) if known(spot.volume_mm3) else MISSING,
        *ends,
        _number(spot.threshold_volume_mm3),
        _number(spot.equivalent_diameter_mm),
        _number(spot.feret_max_mm),
        _fixed(spot.sphericity, 2),
        *(_fixed(x, decimals_mm) for x in spot.position_mm),
        _fixed(spot.ligament_mm, decimals_mm + 1),
        _fixed(spot.nearest_mm, decimals_mm + 1),
        _fixed(spot.contrast, 2),
    ]


def _number(value: float | None) -> str:
    shown = figure(value)
    return shown.value if shown.exists else MISSING


def _fixed(value: float | None, decimals: int) -> str:
    return plain(value, decimals) if value is not None and known(value) else MISSING
