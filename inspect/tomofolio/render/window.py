"""From values to grey levels: the window of DICOM PS3.3 C.11.2.1.2.1, and one made from the ranges."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from tomofolio.ranges.result import Ranges


def apply_window(values: ArrayLike, centre: float, width: float) -> NDArray[np.uint8]:
    """Grey levels 0..255 by the linear window function of DICOM PS3.3 C.11.2.1.2.1.

    Parameters
    ----------
    values : any shape, in the scan's unit.
    centre, width : window centre and width; the width is at least 1.

    Returns
    -------
    same shape, uint8, rounded to the nearest level.
    """
    if width < 1:
        raise ValueError("a window is at least 1 wide")
    values = np.asarray(values, dtype=np.float64)
    low, high = centre - 0.5 - (width - 1) / 2, centre - 0.5 + (width - 1) / 2
    with np.errstate(divide="ignore", invalid="ignore"):
        grey = ((values - (centre - 0.5)) / (width - 1) + 0.5) * 255.0
    grey = np.where(values <= low, 0.0, np.where(values > high, 255.0, grey))
    return np.rint(np.nan_to_num(grey)).astype(np.uint8)


def window_from_ranges(ranges: Ranges) -> tuple[float, float]:
    """A window (centre, width) in which every range of the scan can be told from its neighbours.

    It begins a little above the background, so that its noise stays black, and ends above the main range with room
    for what is denser: rare and very dense matter must not press everything else into the dark.
    """
    items = ranges.items
    main, background = ranges.main, ranges.background
    matter = [item for item in items if not item.background] or list(items)
    denser = max(item.peak + item.spread for item in matter)
    if background is None:
        low = matter[0].peak - 4 * matter[0].spread
    else:
        low = background.peak + 0.15 * (main.peak - background.peak)
    if len(matter) > 2:  # materials that lie close together get the greys; what is far off may go black or white
        span = denser - main.peak if denser > main.peak + 4 * main.spread else main.peak - low
        low = max(low, min(main.peak - 0.4 * span, matter[0].peak - 2 * matter[0].spread))
        high = main.peak + 0.6 * span
    else:
        high = max(main.peak + max(4 * main.spread, 0.25 * (main.peak - low)), denser)
        high = min(high, main.peak + 1.6 * (main.peak - low))
    width = max(high - low, 1.0)
    return (low + high) / 2 + 0.5, width + 1.0
