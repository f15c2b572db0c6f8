"""How many voids there are of each size, as a drawing."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tomofolio.report.chart import Plot, draw_bottom_axis, draw_left_axis, round_ticks
from tomofolio.report.numbers import count
from tomofolio.report.style import ACCENT, INK, REGULAR, SIZE_SMALL, WARM, mm, width_of

# isort: split
from reportlab.platypus import Flowable


@dataclass(frozen=True)
class Limit:
    """A diameter to mark, with its name."""

    diameter_mm: float
    name: str


def size_bins(diameters: NDArray[np.float64]) -> NDArray[np.float64]:
    """Edges of equal bins of a round width; about twice the cube root of the number of bins (the rule of Rice)."""
    low, high = float(diameters.min()), float(diameters.max())
    wanted = max(6, math.ceil(2 * len(diameters) ** (1 / 3)))
    span = max(high - low, 0.1 * high, 1e-9)
    power = 10.0 ** math.floor(math.log10(span / wanted))
    width = next(m * power for m in (1, 2, 5, 10) if span / (m * power) <= wanted)
    first, last = math.floor(low / width + 1e-9), math.ceil(high / width + 1e-9)
    return np.arange(first, max(last, first + 1) + 1, dtype=np.float64) * width


class SizeChart(Flowable):
    """Numbers of voids by equivalent diameter, with the limits of the scan marked."""

    def __init__(self, diameters: Sequence[float], limits: Sequence[Limit], what: str, height: float = 42 * mm) -> None:
        super().__init__()
        self._diameters, self._limits = np.array(diameters, dtype=float), limits
        self._what, self._height = what, height
        self.spaceAfter = 4

    def wrap(self, width: float, height: float) -> tuple[float, float]:
        self.width, self.height = width, self._height
        return self.width, self.height

    def draw(self) -> None:
        canvas = self.canv
        edges = size_bins(self._diameters)
        counts, _ = np.histogram(self._diameters, edges)
        first, last = float(edges[0]), float(edges[-1])
        shown = [limit for limit in self._limits if limit.diameter_mm < last * 1.5]
        first = min(first, *(limit.diameter_mm for limit in shown)) if shown else first
        last = max(last, *(limit.diameter_mm for limit in shown)) if shown else last
        margin = 0.03 * (last - first)
        plot = Plot(24, 25, self.width - 28, self._height - 25 - 16, max(first - margin, 0.0), last + margin)
        most = max(int(counts.max()), 1)
        top = most * 1.12

        def y(value: float) -> float:
            return plot.bottom + plot.height * value / top

        ticks = [t for t in round_ticks(0, most, 4) if float(t).is_integer()]
        draw_left_axis(canvas, plot, [(t, count(int(t))) for t in ticks], y, f"number of {self._what}")
        canvas.setFillColor(ACCENT)
        for n, number in enumerate(counts):
            if number:
                left, right = plot.x(float(edges[n])), plot.x(float(edges[n + 1]))
                canvas.rect(
                    left + 0.3, plot.bottom, max(right - left - 0.6, 0.4), y(number) - plot.bottom, stroke=0, fill=1
                )
        self._draw_limits(plot, shown)
        draw_bottom_axis(canvas, plot, "equivalent diameter (mm)")

    def _draw_limits(self, plot: Plot, limits: Sequence[Limit]) -> None:
        canvas, taken = self.canv, -1.0
        for limit in sorted(limits, key=lambda entry: entry.diameter_mm):
            x, top = plot.x(limit.diameter_mm), plot.bottom + plot.height
            canvas.saveState()
            canvas.setStrokeColor(WARM)
            canvas.setLineWidth(0.8)
            canvas.setDash(2, 1.5)
            canvas.line(x, plot.bottom, x, top + 2)
            canvas.restoreState()
            canvas.setFont(REGULAR, SIZE_SMALL)
            canvas.setFillColor(INK)
            wide = width_of(limit.name, SIZE_SMALL)
            place = max(min(x, plot.left + plot.width - wide), taken + 6, 90.0)
            canvas.drawString(place, top + 5, limit.name)
            taken = place + wide
