"""The histogram as a drawing: counts on a log scale, ranges, boundaries with their intervals, model and opacity."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from tomofolio.ranges.result import Ranges, ValueRange
from tomofolio.render.tables import TransferTable
from tomofolio.report.chart import Plot, decade_text, draw_bottom_axis, draw_left_axis
from tomofolio.report.frame import clipped
from tomofolio.report.style import (
    ACCENT,
    HAIR,
    INK,
    REGULAR,
    SEMIBOLD,
    SIZE_SMALL,
    SOFT,
    WARM,
    Color,
    mm,
    printable,
    rgb,
    width_of,
)
from tomofolio.volume import Unit

# isort: split
from reportlab.pdfgen.pathobject import PDFPathObject
from reportlab.platypus import Flowable

#: Bins are joined until no more than this are left: finer steps are not seen in print.
MOST_STEPS = 360
#: The opacity is drawn for a path of about this share of the object's size.
PATH_SHARE = 0.05


def range_colours(tables: TransferTable) -> dict[str, Color]:
    """Colour of each range that pictures show; a range without one is not drawn in them."""
    return {name: rgb(*colour) for name, colour in tables.range_colours}


def path_length_mm(size_mm: float) -> float:
    """A round length (1, 2 or 5 times a power of ten) near a twentieth of the object's size."""
    wanted = max(size_mm * PATH_SHARE, 1e-9)
    power = 10.0 ** math.floor(math.log10(wanted))
    return min((m * power for m in (1, 2, 5, 10)), key=lambda length: abs(math.log(length / wanted)))


def joined_bins(
    centres: NDArray[np.float64], counts: NDArray, most: int = MOST_STEPS
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Neighbouring bins joined to at most ``most``; counts become means, so that the height stays that of one bin."""
    group = -(-len(centres) // most)
    if group == 1:
        return centres, counts.astype(np.float64)
    length = len(centres) // group * group
    joined = counts[:length].astype(np.float64).reshape(-1, group).mean(axis=1)
    middles = centres[:length].reshape(-1, group).mean(axis=1)
    if length < len(centres):
        joined = np.append(joined, counts[length:].sum() / group)
        middles = np.append(middles, centres[length:].mean())
    return middles, joined


def shown_limits(ranges: Ranges) -> tuple[float, float]:
    """Values between which all but a millionth of the voxels and all peaks lie."""
    histogram = ranges.histogram
    share = np.cumsum(histogram.counts) / max(int(histogram.counts.sum()), 1)
    low = float(histogram.centres[int(np.searchsorted(share, 1e-6))])
    high = float(histogram.centres[min(int(np.searchsorted(share, 1 - 1e-6)), len(share) - 1)])
    low = min(low, *(item.peak - 4 * item.spread for item in ranges.items))
    high = max(high, *(item.peak + 4 * item.spread for item in ranges.items))
    low = max(low, float(histogram.centres[0]) - 2 * histogram.width)
    high = min(high, float(histogram.centres[-1]) + 2 * histogram.width)
    margin = 0.02 * (high - low) or histogram.width
    return low - margin, high + margin


class HistogramChart(Flowable):
    """The chart.

    Parameters
    ----------
    ranges, tables, unit : of the case.
    path_mm : length of the path for which the opacity is drawn.
    height : of the whole chart in points.
    """

    def __init__(
        self, ranges: Ranges, tables: TransferTable, unit: Unit, path_mm: float, height: float = 82 * mm
    ) -> None:
        super().__init__()
        self._ranges, self._tables, self._unit = ranges, tables, unit
        self._path_mm, self._height = path_mm, height
        self.spaceAfter = 4

    def wrap(self, width: float, height: float) -> tuple[float, float]:
        self.width, self.height = width, self._height
        return self.width, self.height

    def draw(self) -> None:
        first, last = shown_limits(self._ranges)
        plot = Plot(24, 25, self.width - 24 - 22, self.height - 25 - 30, first, last)
        counts = self._ranges.histogram.counts
        powers = max(1, math.ceil(math.log10(max(float(counts.max()), 2.0)) + 0.03))

        def y(count: float) -> float:
            # Half a voxel is the foot of the scale, so that a single voxel still shows.
            share = (math.log10(max(count, 0.5)) + 0.301) / (powers + 0.301)
            return plot.bottom + plot.height * share

        self._draw_bands(plot)
        every = 1 if powers <= 6 else 2
        ticks = [(10.0**p, decade_text(p)) for p in range(0, powers + 1, every)]
        draw_left_axis(self.canv, plot, ticks, y, "voxels in a bin", rise=15.0)
        self._draw_counts(plot, y)
        self._draw_boundaries(plot)
        self._draw_model(plot, y)
        self._draw_opacity(plot)
        draw_bottom_axis(self.canv, plot, f"{self._unit.quantity} ({self._unit.symbol})".replace(" ()", ""))

    def _draw_bands(self, plot: Plot) -> None:
        """A tint for every range, with its name on top."""
        canvas, colours = self.canv, range_colours(self._tables)
        for item in self._ranges.items:
            left = plot.x(item.lower) if item.lower is not None else plot.left
            right = plot.x(item.upper) if item.upper is not None else plot.left + plot.width
            tint = _tint(colours[item.id]) if item.id in colours else rgb(248, 248, 247)
            canvas.setFillColor(tint)
            canvas.rect(left, plot.bottom, right - left, plot.height, stroke=0, fill=1)
            if item.id in colours:
                canvas.setFillColor(colours[item.id])
                canvas.rect(left, plot.bottom + plot.height, right - left, 2, stroke=0, fill=1)
            self._draw_name(item, left, right, plot.bottom + plot.height + 5)

    def _draw_name(self, item: ValueRange, left: float, right: float, y: float) -> None:
        """Number and name of a range over its band; the number alone where there is no room for more."""
        canvas, room = self.canv, right - left - 4
        middle = (left + right) / 2
        text = item.id if item.name in ("", item.id) else f"{item.id} {printable(item.name)}"
        text = clipped(text, SIZE_SMALL, room, SEMIBOLD)
        if "…" in text and len(text) < 8:
            text = item.id
        if width_of(text, SIZE_SMALL, SEMIBOLD) > right - left + 6:
            return
        canvas.setFont(SEMIBOLD, SIZE_SMALL)
        canvas.setFillColor(INK)
        canvas.drawCentredString(middle, y, text)

    def _draw_counts(self, plot: Plot, y: object) -> None:
        histogram = self._ranges.histogram
        inside = (histogram.centres >= plot.first) & (histogram.centres <= plot.last)
        centres, counts = joined_bins(histogram.centres[inside], histogram.counts[inside])
        if not len(centres):
            return
        half = (centres[1] - centres[0]) / 2 if len(centres) > 1 else histogram.width / 2
        path = self.canv.beginPath()
        path.moveTo(plot.x(centres[0] - half), plot.bottom)
        for centre, count in zip(centres, counts, strict=True):
            top = y(count) if count > 0 else plot.bottom  # type: ignore[operator]
            path.lineTo(plot.x(centre - half), top)
            path.lineTo(plot.x(centre + half), top)
        path.lineTo(plot.x(centres[-1] + half), plot.bottom)
        path.close()
        self.canv.setFillColor(rgb(178, 186, 190))
        self.canv.drawPath(path, stroke=0, fill=1)

    def _draw_boundaries(self, plot: Plot) -> None:
        """A line at every boundary, over a band that is its 95 % interval."""
        canvas = self.canv
        for item in self._ranges.items[1:]:
            if item.lower is None or not plot.inside(item.lower):
                continue
            if item.lower_95 is not None:
                left, right = plot.x(item.lower_95[0]), plot.x(item.lower_95[1])
                canvas.setFillColor(HAIR)
                canvas.rect(left, plot.bottom, max(right - left, 0.2), plot.height, stroke=0, fill=1)
            canvas.setStrokeColor(INK)
            canvas.setLineWidth(0.7)
            canvas.line(plot.x(item.lower), plot.bottom, plot.x(item.lower), plot.bottom + plot.height + 2)

    def _draw_model(self, plot: Plot, y: object) -> None:
        histogram = self._ranges.histogram
        inside = (histogram.centres >= plot.first) & (histogram.centres <= plot.last)
        centres, counts = joined_bins(histogram.centres[inside], np.asarray(self._ranges.model)[inside])
        path = self.canv.beginPath()
        _polyline(path, [(plot.x(c), y(n)) for c, n in zip(centres, counts, strict=True) if n >= 0.5])  # type: ignore[operator]
        self.canv.setStrokeColor(ACCENT)
        self.canv.setLineWidth(1.1)
        self.canv.setDash()
        self.canv.drawPath(path)

    def _draw_opacity(self, plot: Plot) -> None:
        """The opacity of a path through matter of one value, on an axis of its own at the right."""
        canvas, tables = self.canv, self._tables
        values = np.linspace(plot.first, plot.last, MOST_STEPS)
        entries = np.linspace(tables.first, tables.last, len(tables.density_per_mm))
        opacity = -np.expm1(-np.interp(values, entries, tables.density_per_mm) * self._path_mm)
        path = canvas.beginPath()
        _polyline(path, [(plot.x(v), plot.bottom + plot.height * o) for v, o in zip(values, opacity, strict=True)])
        canvas.saveState()
        canvas.setStrokeColor(WARM)
        canvas.setLineWidth(0.9)
        canvas.setDash(3, 2)
        canvas.drawPath(path)
        canvas.restoreState()
        right = plot.left + plot.width
        canvas.setFont(REGULAR, SIZE_SMALL)
        canvas.setFillColor(WARM)
        for share in (0.0, 0.5, 1.0):
            canvas.drawString(right + 4, plot.bottom + plot.height * share - 0.35 * SIZE_SMALL, f"{100 * share:.0f}")
        canvas.drawRightString(self.width, plot.bottom + plot.height + 15, "opacity (%)")
        canvas.setFillColor(SOFT)


def _polyline(path: PDFPathObject, points: list[tuple[float, float]]) -> None:
    for n, (x, y) in enumerate(points):
        (path.lineTo if n else path.moveTo)(x, y)


def _tint(colour: Color, strength: float = 0.16) -> Color:
    """A colour thinned with white, opaque: transparency would print unevenly."""
    return Color(*(1 - strength * (1 - part) for part in (colour.red, colour.green, colour.blue)))
