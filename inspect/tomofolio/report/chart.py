"""What the charts share: axes with round ticks, drawn as vectors."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

from tomofolio.report.numbers import plain
from tomofolio.report.style import HAIR, INK, REGULAR, SIZE_SMALL, SOFT, width_of

# isort: split
from reportlab.pdfgen.canvas import Canvas


@dataclass(frozen=True)
class Plot:
    """The inner rectangle of a chart and the values at its sides, in points and in the units of the axes."""

    left: float
    bottom: float
    width: float
    height: float
    first: float
    last: float

    def x(self, value: float) -> float:
        """Where a value lies on the horizontal axis, kept within the rectangle."""
        share = (value - self.first) / (self.last - self.first)
        return self.left + self.width * min(max(share, 0.0), 1.0)

    def inside(self, value: float) -> bool:
        return self.first <= value <= self.last


def round_ticks(first: float, last: float, most: int = 7) -> list[float]:
    """At most ``most`` values 1, 2 or 5 times a power of ten apart that lie between the ends."""
    span = last - first
    if not span > 0:
        return [first]
    power = 10.0 ** math.floor(math.log10(span / most))
    step = next(m * power for m in (1, 2, 5, 10, 20) if span / (m * power) <= most)
    start, stop = math.ceil(first / step - 1e-9), math.floor(last / step + 1e-9)
    return [n * step for n in range(start, stop + 1)]


def tick_texts(ticks: Sequence[float]) -> list[str]:
    """The ticks as numbers with as many decimals as their distance needs."""
    if len(ticks) < 2:
        return [f"{tick:.4g}" for tick in ticks]
    decimals = max(0, -math.floor(math.log10(ticks[1] - ticks[0]) + 1e-9))
    return [plain(tick, decimals) for tick in ticks]


def draw_bottom_axis(canvas: Canvas, plot: Plot, title: str) -> None:
    """Baseline, ticks with numbers, and the title at the right end under them."""
    canvas.setStrokeColor(INK)
    canvas.setLineWidth(0.6)
    canvas.line(plot.left, plot.bottom, plot.left + plot.width, plot.bottom)
    ticks = round_ticks(plot.first, plot.last)
    canvas.setFont(REGULAR, SIZE_SMALL)
    canvas.setFillColor(SOFT)
    for tick, text in zip(ticks, tick_texts(ticks), strict=True):
        x = plot.x(tick)
        canvas.line(x, plot.bottom, x, plot.bottom - 2.5)
        # Digits are centred under the tick without the minus, so that −100 and 100 stand alike.
        shift = width_of("−", SIZE_SMALL) / 2 if text.startswith("−") else 0.0
        canvas.drawCentredString(x - shift, plot.bottom - 3.5 - SIZE_SMALL, text)
    canvas.setFillColor(INK)
    canvas.drawRightString(plot.left + plot.width, plot.bottom - 6 - 2.2 * SIZE_SMALL, title)


def draw_left_axis(
    canvas: Canvas,
    plot: Plot,
    ticks: Sequence[tuple[float, str]],
    y: Callable[[float], float],
    title: str,
    rise: float = 5.0,
) -> None:
    """Hairlines across the plot with their numbers at the left, the title ``rise`` above them."""
    canvas.setStrokeColor(HAIR)
    canvas.setLineWidth(0.35)
    canvas.setFont(REGULAR, SIZE_SMALL)
    canvas.setFillColor(SOFT)
    for tick, text in ticks:
        canvas.line(plot.left, y(tick), plot.left + plot.width, y(tick))
        canvas.drawRightString(plot.left - 3, y(tick) - 0.35 * SIZE_SMALL, text)
    canvas.setFillColor(INK)
    canvas.drawString(0, plot.bottom + plot.height + rise, title)


def decade_text(power: int) -> str:
    """1, 10, 100, 1000, then 10⁴, 10⁵ ..."""
    if power < 4:
        return str(10**power)
    return "10" + "".join("⁰¹²³⁴⁵⁶⁷⁸⁹"[int(digit)] for digit in str(power))
