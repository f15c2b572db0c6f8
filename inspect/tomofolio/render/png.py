"""A view as a PNG file, its marks drawn into the pixels and its caption written into a text chunk."""

from __future__ import annotations

from pathlib import Path

from PIL import Image, ImageDraw, ImageFont
from PIL.PngImagePlugin import PngInfo

from tomofolio.render.view import Caption, Stroke, View

INK, PAPER, OUTLINE = (38, 44, 52), (250, 249, 246), (214, 84, 20)
#: Marks are drawn at so many times the size and scaled down, for smooth lines.
FINER = 2
ANCHORS = {"left": "l", "centre": "m", "right": "r", "top": "t", "middle": "m", "bottom": "b"}


def write_png(view: View, path: Path, *, dpi: int = 300) -> None:
    """Write the view; the same view gives the same bytes.

    Parameters
    ----------
    view : the picture with its marks.
    path : of the file to write.
    dpi : resolution told to printers.
    """
    info = PngInfo()
    info.add_itxt("Title", view.title)
    info.add_itxt("Description", view.caption)
    draw_marks(view).save(path, format="PNG", pnginfo=info, dpi=(dpi, dpi), compress_level=6)


def draw_marks(view: View) -> Image.Image:
    """The view's pixels with its marks drawn into them, RGB."""
    picture = Image.fromarray(view.pixels).convert("RGB")
    size = (picture.width * FINER, picture.height * FINER)
    layer = Image.new("RGBA", size, (*INK, 0))
    draw = ImageDraw.Draw(layer)
    unit = FINER * max(picture.size) / 1000.0
    for mark in view.marks:
        if isinstance(mark, Stroke):
            _draw_stroke(draw, mark, unit)
        else:
            _draw_caption(draw, mark, unit)
    layer = layer.resize(picture.size, Image.Resampling.BOX)
    picture.paste(layer, (0, 0), layer)
    return picture


def _draw_stroke(draw: ImageDraw.ImageDraw, mark: Stroke, unit: float) -> None:
    points = [(x * FINER, y * FINER) for x, y in mark.points]
    if mark.closed:
        points += points[:2]  # once round and on, so that the joint has no gap
    if mark.role == "outline":
        draw.line(points, fill=(*PAPER, 235), width=max(round(3.6 * unit), 3), joint="curve")
        draw.line(points, fill=(*OUTLINE, 255), width=max(round(1.8 * unit), 2), joint="curve")
    else:
        draw.line(points, fill=(*INK, 255), width=max(round(2.2 * unit), 2), joint="curve")


def _draw_caption(draw: ImageDraw.ImageDraw, mark: Caption, unit: float) -> None:
    across, along = mark.align.split("-")
    size = {"letter": 26.0, "scale": 22.0, "number": 22.0}[mark.role] * unit
    font = ImageFont.load_default(size)
    at = (mark.at[0] * FINER, mark.at[1] * FINER)
    text = mark.text.replace("−", "-")  # the bundled font has no minus sign
    draw.text(at, text, fill=(*INK, 255), font=font, anchor=ANCHORS[across] + ANCHORS[along])
