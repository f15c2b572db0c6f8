"""A picture with its marks as vectors, its caption and its key."""

from __future__ import annotations

import zlib
from collections.abc import Sequence
from io import BytesIO

from PIL import Image

from tomofolio.render.view import Caption, Stroke, View
from tomofolio.report.frame import clipped
from tomofolio.report.numbers import plain, with_unit
from tomofolio.report.style import (
    HAIR,
    INK,
    PAPER,
    REGULAR,
    SEMIBOLD,
    SIZE_MARK,
    SIZE_SMALL,
    SOFT,
    WARM,
    Color,
    leading,
    mm,
    printable,
    rgb,
    width_of,
)
from tomofolio.report.text import wrapped

# isort: split
from reportlab.lib.utils import ImageReader
from reportlab.platypus import Flowable

#: JPEG quality (colour at full resolution) at which edges show no ringing in print.
QUALITY = 92
#: Pixels lighter than this (0..255) get dark marks.
LIGHT = 140
#: The cell of a slim picture is at least so many times its height wide, so that its caption stays readable.
NARROWEST = 0.62
#: Narrowest column for texts at the right of a picture.
LEAST_ASIDE = 38 * mm
#: Room for a letter at a picture's side, in units of its distance from that side.
MARGIN_PER_INSET = 2.9
#: Letters never get smaller than this, in points.
SMALLEST_LETTER = 5.0
#: Marks are set smaller on pictures lower than this.
SMALL_PICTURE = 55 * mm
#: Outlines on dark pixels.
BRIGHT = rgb(255, 176, 92)


def embedded(view: View) -> ImageReader:
    """The pixels as reportlab embeds them: as JPEG, or for grey pictures without loss where that is smaller."""
    image = Image.fromarray(view.pixels)
    jpeg = BytesIO()
    image.save(jpeg, "JPEG", quality=QUALITY, subsampling=0, optimize=True)
    if view.pixels.ndim == 2 and len(zlib.compress(view.pixels.tobytes())) <= len(jpeg.getvalue()):
        return ImageReader(image)
    return ImageReader(jpeg)


class Picture(Flowable):
    """A view with its texts below.

    Parameters
    ----------
    view : what to show.
    scale : points per pixel.
    unit : symbol of the values, for the key of a grey picture.
    captioned : False leaves the text under the picture to its title.
    aside : the texts may stand at the right of a picture that leaves enough room there.
    """

    def __init__(
        self, view: View, scale: float, unit: str = "", *, captioned: bool = True, aside: bool = False
    ) -> None:
        super().__init__()
        self._view, self._scale, self._unit, self._captioned = view, scale, unit, captioned
        self._may_stand_aside = aside
        self._title = printable(view.title)
        self._caption = printable(view.caption) if captioned else ""
        rows, columns = view.pixels.shape[:2]
        self.image_width, self.image_height = columns * scale, rows * scale

    def _texts(self, width: float) -> tuple[list[str], list[str]]:
        return (
            wrapped(self._title, SIZE_SMALL, width, SEMIBOLD),
            wrapped(self._caption, SIZE_SMALL, width) if self._caption else [],
        )

    def _has_key(self) -> bool:
        return self._captioned and (self._view.key.window is not None or bool(self._view.key.colours))

    def _text_place(self, width: float) -> tuple[float, float, bool]:
        """Left end and width of the texts, and whether they stand at the right of the picture."""
        left = self.image_width + 5 * mm
        if self._may_stand_aside and width - left >= LEAST_ASIDE:
            return left, width - left, True
        return 0.0, width, False

    def wrap(self, width: float, height: float) -> tuple[float, float]:
        _, room, aside = self._text_place(width)
        title, caption = self._texts(room)
        texts = (len(title) + len(caption)) * leading(SIZE_SMALL) + (
            leading(SIZE_SMALL) + 2 if self._has_key() else 0.0
        )
        self.width = width
        self.height = max(self.image_height, texts) if aside else self.image_height + 3 + texts
        return self.width, self.height

    def draw(self) -> None:
        canvas = self.canv
        bottom = self.height - self.image_height
        canvas.drawImage(embedded(self._view), 0, bottom, self.image_width, self.image_height)
        canvas.saveState()
        canvas.translate(0, self.height)
        for mark in self._view.marks:
            if isinstance(mark, Stroke):
                self._draw_stroke(mark)
        for mark in self._view.marks:
            if isinstance(mark, Caption):
                self._draw_caption(mark)
        canvas.restoreState()
        x, room, aside = self._text_place(self.width)
        y = self.height if aside else bottom - 3
        title, caption = self._texts(room)
        for lines, font, colour in ((title, SEMIBOLD, INK), (caption, REGULAR, SOFT)):
            canvas.setFont(font, SIZE_SMALL)
            canvas.setFillColor(colour)
            for line in lines:
                canvas.drawString(x, y - SIZE_SMALL, line)
                y -= leading(SIZE_SMALL)
        if self._has_key():
            self._draw_key(x, y - 2 - SIZE_SMALL, x + room)

    def _is_light(self, x0: float, y0: float, x1: float, y1: float) -> bool:
        """Whether the picture is light on average within a box in its pixels."""
        rows, columns = self._view.pixels.shape[:2]
        left, right = (int(min(max(v, 0), columns - 1)) for v in (x0, x1))
        top, bottom = (int(min(max(v, 0), rows - 1)) for v in (y0, y1))
        return float(self._view.pixels[top : bottom + 1, left : right + 1].mean()) > LIGHT

    def _scale_bar_end(self) -> tuple[float, float] | None:
        """The lower right end of the scale bar, in pixels."""
        bars = [mark for mark in self._view.marks if isinstance(mark, Stroke) and mark.role == "scale"]
        if not bars:
            return None
        return max(x for bar in bars for x, _ in bar.points), max(y for bar in bars for _, y in bar.points)

    def _draw_stroke(self, mark: Stroke) -> None:
        """A line with a thin halo of the other lightness, so that it shows on every ground."""
        canvas = self.canv
        xs, ys = [p[0] for p in mark.points], [p[1] for p in mark.points]
        light = self._is_light(min(xs), min(ys), max(xs), max(ys))
        weight = {"scale": 1.2, "outline": 0.8, "cross": 0.6}[mark.role]
        front = (INK if light else PAPER) if mark.role == "scale" else (WARM if light else BRIGHT)
        path = canvas.beginPath()
        for n, (x, y) in enumerate(mark.points):
            (path.lineTo if n else path.moveTo)(x * self._scale, -y * self._scale)
        if mark.closed:
            path.close()
        for colour, extra in ((PAPER if light else INK, 0.8), (front, 0.0)):
            canvas.setStrokeColor(colour)
            canvas.setLineWidth(weight + extra)
            canvas.drawPath(path)

    def _draw_caption(self, mark: Caption) -> None:
        scale = self._scale
        font = SEMIBOLD if mark.role == "letter" else REGULAR
        size = SIZE_MARK if mark.role == "number" or self.image_height < SMALL_PICTURE else SIZE_SMALL
        lines = [printable(mark.text)]
        x, y = mark.at[0] * scale, -mark.at[1] * scale
        across, _, along = mark.align.partition("-")
        if mark.role == "letter" and min(x, self.image_width - x) < 0.1 * self.image_width:
            lines = lines[0].split()  # "+X −Y" at a side stands in two lines, off the object
        elif mark.role == "scale" and (end := self._scale_bar_end()) is not None:
            # Beside the bar, not under it: in a small print there is no room under it.
            x, y, across, along = end[0] * scale + 3.5, -end[1] * scale - 0.5, "left", "bottom"
        if mark.role == "letter":
            # Smaller rather than over the object: the margin is a few times as wide as the letter's own inset.
            widest = max(width_of(line, size, font) for line in lines)
            inset = min(x, self.image_width - x)
            size = max(min(size, MARGIN_PER_INSET * inset * size / widest), SMALLEST_LETTER)
        width, step = max(width_of(line, size, font) for line in lines), 1.15 * size
        tall = 0.7 * size + step * (len(lines) - 1)
        x -= {"left": 0.0, "right": width}.get(across, width / 2)
        y -= {"top": tall, "bottom": 0.0}.get(along, tall / 2)
        x = min(max(x, 1.0), self.image_width - width - 1.0)
        y = min(max(y, 1.5 - self.image_height), -tall - 1.0)
        light = self._is_light(x / scale, -(y + tall) / scale, (x + width) / scale, -y / scale)
        self.canv.setFont(font, size)
        self.canv.setFillColor(INK if light else PAPER)
        for n, line in enumerate(reversed(lines)):
            self.canv.drawString(x + (width - width_of(line, size, font)) / 2, y + n * step, line)

    def _draw_key(self, x: float, base: float, right: float) -> None:
        """A grey ramp with the values at its ends, or a swatch for every colour."""
        canvas, key = self.canv, self._view.key
        canvas.setFont(REGULAR, SIZE_SMALL)
        if key.window is not None:
            self._draw_ramp(key.window, x, base, right)
            return
        for label, colour in key.colours:
            text = clipped(printable(label), SIZE_SMALL, right - x - 12)
            if not text:
                break
            canvas.setFillColor(rgb(*colour))
            canvas.rect(x, base - 0.5, 7, 7, stroke=0, fill=1)
            canvas.setFillColor(SOFT)
            canvas.drawString(x + 10, base, text)
            x += 10 + width_of(text, SIZE_SMALL) + 9

    def _draw_ramp(self, window: tuple[float, float], left: float, base: float, right: float) -> None:
        canvas, (centre, width) = self.canv, window
        decimals = 0 if width >= 20 else 2
        low, high = (plain(centre + side * width / 2, decimals) for side in (-1, 1))
        high = with_unit(high, self._unit)
        x, steps = left + width_of(low, SIZE_SMALL) + 4, 32
        length = min(26 * mm, right - x - 4 - width_of(high, SIZE_SMALL))
        if length < 6 * mm:
            return
        canvas.setFillColor(SOFT)
        canvas.drawString(left, base, low)
        for n in range(steps):
            canvas.setFillColor(Color(*[n / (steps - 1)] * 3))
            # Each step reaches to the end, so that no seam shows between two of them.
            canvas.rect(x + n * length / steps, base - 0.5, length * (1 - n / steps), 6, stroke=0, fill=1)
        canvas.setStrokeColor(HAIR)
        canvas.setLineWidth(0.4)
        canvas.rect(x, base - 0.5, length, 6, stroke=1, fill=0)
        canvas.setFillColor(SOFT)
        canvas.drawString(x + length + 4, base, high)


class PictureRow(Flowable):
    """Pictures side by side, their tops level.

    Parameters
    ----------
    pictures : from left to right.
    gutter : between two of them, in points.
    columns : how many equal columns the row has; 0 makes each cell as wide as its picture.
    """

    def __init__(self, pictures: Sequence[Picture], gutter: float, columns: int = 0) -> None:
        super().__init__()
        self._pictures, self._gutter, self._columns = pictures, gutter, columns
        self.spaceAfter = 9

    def _widths(self, width: float) -> list[float]:
        if not self._columns:
            return [max(picture.image_width, NARROWEST * picture.image_height) for picture in self._pictures]
        return [(width - self._gutter * (self._columns - 1)) / self._columns] * len(self._pictures)

    def wrap(self, width: float, height: float) -> tuple[float, float]:
        self.width = width
        widths = self._widths(width)
        self.height = max(picture.wrap(w, 1e6)[1] for picture, w in zip(self._pictures, widths, strict=True))
        return self.width, self.height

    def draw(self) -> None:
        x = 0.0
        for picture, width in zip(self._pictures, self._widths(self.width), strict=True):
            _, height = picture.wrap(width, 1e6)
            picture.drawOn(self.canv, x, self.height - height)
            x += width + self._gutter


def level_scales(views: Sequence[View], width: float, most_height: float, gutter: float) -> list[float]:
    """Points per pixel that set pictures side by side at one height, over the whole width or to the height given."""
    if not views:
        return []
    aspects = [max(view.pixels.shape[1] / view.pixels.shape[0], NARROWEST) for view in views]
    height = min(most_height, (width - gutter * (len(views) - 1)) / sum(aspects))
    return [height / view.pixels.shape[0] for view in views]
