"""Small boxes around the seeds, cut out with all that one needs to measure the spots in them."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from tomofolio.body.result import Body, Region
from tomofolio.body.runs import Runs
from tomofolio.measure.level import LevelField
from tomofolio.measure.seeds import Noise
from tomofolio.volume import Volume

#: A core is a connected piece of at least this many voxels past half-way; smaller ones join the nearest core.
SMALLEST_CORE_VOXELS = 4
#: How far beyond the core its missing grey value is summed up, and from where the material is plain again, in blur σ
#: beyond half a voxel; the shell in which the material's level is taken is so many voxels thick.
OWN_SIGMA, CLEAR_SIGMA, SHELL_VOXELS = 2.2, 3.0, 3.0


@dataclass(frozen=True)
class Patch:
    """One spot's surroundings; all arrays have the shape of the box.

    ``darkness`` is the difference to the local level with the sign that makes the spot positive, in the scan's unit;
    ``core`` the voxels of this spot past half-way (or its seeds where none are); ``own`` the voxels whose difference
    belongs to this spot; ``shell`` plain material around; ``distance_vox`` the distance to the core in units in which
    the finest spacing is 1; ``edge_vox`` the same to the outside.
    """

    start: NDArray[np.int64]
    darkness: NDArray[np.float32]
    core: NDArray[np.bool_]
    past_half: NDArray[np.bool_]
    own: NDArray[np.bool_]
    shell: NDArray[np.bool_]
    distance_vox: NDArray[np.float64]
    edge_vox: NDArray[np.float64]
    level: float


def component_boxes(runs: Runs) -> NDArray[np.int64]:
    """Shape (components, 3, 2): first and past-the-last index of every component [slice, row, column]."""
    boxes = np.empty((runs.count, 3, 2), np.int64)
    slices, rows = np.divmod(runs.row, runs.shape[1])
    for axis, (low, high) in enumerate(((slices, slices), (rows, rows), (runs.start, runs.stop.astype(np.int64) - 1))):
        first = np.full(runs.count, np.iinfo(np.int64).max)
        last = np.full(runs.count, -1)
        np.minimum.at(first, runs.label, low)
        np.maximum.at(last, runs.label, high)
        boxes[:, axis, 0], boxes[:, axis, 1] = first, last + 1
    return boxes


def merge_boxes(boxes: NDArray[np.int64], margin: NDArray[np.int64]) -> list[list[int]]:
    """Groups of components whose boxes, grown by the margin, touch: they are cut out and shared out together."""
    parent = np.arange(len(boxes))

    def root(a: int) -> int:
        while parent[a] != a:
            parent[a] = parent[parent[a]]
            a = parent[a]
        return a

    order = np.argsort(boxes[:, 0, 0], kind="stable")
    active: list[int] = []
    for a in order:
        active = [b for b in active if boxes[b, 0, 1] + margin[0] > boxes[a, 0, 0]]
        for b in active:
            low = np.maximum(boxes[a, :, 0], boxes[b, :, 0])
            high = np.minimum(boxes[a, :, 1], boxes[b, :, 1])
            if np.all(low < high + margin):
                parent[root(int(a))] = root(b)
        active.append(int(a))
    groups: dict[int, list[int]] = {}
    for a in range(len(boxes)):
        groups.setdefault(root(a), []).append(a)
    return list(groups.values())


def patches(
    volume: Volume,
    body: Body,
    runs: Runs,
    field: LevelField,
    contrast: float,
    noise: Noise,
    *,
    sign: int,
) -> Iterator[Patch]:
    """Cut out every spot. ``contrast`` is material minus background.

    A voxel of a dark spot is past half-way at half the contrast. A core is what lies past half of the spot's own
    strongest mean of 27 voxels, so that faint and bright spots, whose contrast is not known beforehand, have one too.
    """
    boxes = component_boxes(runs)
    finest = min(volume.grid.spacing_mm)
    spacing = np.array(volume.grid.spacing_mm) / finest
    blur = noise.blur_vox * spacing
    reach = 0.5 + OWN_SIGMA * float(blur.max())
    clear = 0.5 + CLEAR_SIGMA * float(blur.max())
    margin = np.ceil((clear + SHELL_VOXELS) / spacing).astype(np.int64) + 1
    limits = np.array(volume.shape)
    for group in merge_boxes(boxes, np.ceil(reach / spacing).astype(np.int64)):
        low = np.maximum(boxes[group, :, 0].min(axis=0) - margin, 0)
        high = np.minimum(boxes[group, :, 1].max(axis=0) + margin, limits)
        place = (slice(low[0], high[0]), slice(low[1], high[1]), slice(low[2], high[2]))
        values = volume.values_in(place)
        regions = body.regions[place]
        index = np.stack(np.meshgrid(*(np.arange(a, b) for a, b in zip(low, high, strict=True)), indexing="ij"), -1)
        level = field.at(index)
        darkness = (sign * (level - values)).astype(np.float32)
        inside = (regions == Region.OBJECT) | (regions == Region.ENCLOSED)
        seeds = _seeds_in(runs, group, low, high)
        half = 0.5 * contrast if sign > 0 else np.inf
        yield from _share_out(low, darkness, level, inside, seeds, half, spacing, reach, clear)


def _seeds_in(runs: Runs, group: list[int], low: NDArray, high: NDArray) -> NDArray[np.bool_]:
    """The seeds of the group's components as a mask of the box."""
    mask = np.zeros(tuple(high - low), bool)
    rows = runs.shape[1]
    wanted = set(group)
    for k in range(low[0], high[0]):
        for j in range(low[1], high[1]):
            row = k * rows + j
            for a in range(runs.first[row], runs.first[row + 1]):
                if int(runs.label[a]) in wanted:
                    mask[k - low[0], j - low[1], int(runs.start[a]) - low[2] : int(runs.stop[a]) - low[2]] = True
    return mask


def _share_out(
    low: NDArray,
    darkness: NDArray,
    level: NDArray,
    inside: NDArray,
    seeds: NDArray,
    half: float,
    spacing: NDArray,
    reach: float,
    clear: float,
) -> Iterator[Patch]:
    seed_pieces, seed_count = ndimage.label(seeds)
    peaks = ndimage.maximum(ndimage.uniform_filter(darkness, 3), seed_pieces, np.arange(seed_count + 1))
    around = seed_pieces[
        tuple(ndimage.distance_transform_edt(seed_pieces == 0, return_distances=False, return_indices=True))
    ]
    own_half = np.minimum(0.5 * np.asarray(peaks), half)[around]
    pieces, count = ndimage.label((darkness > own_half) & inside)
    past_half = (darkness > (half if np.isfinite(half) else own_half)) & inside
    touched = np.zeros(count + 1, bool)
    touched[np.unique(pieces[seeds])] = True
    sizes = np.bincount(pieces.ravel(), minlength=count + 1)
    touched[0] = False
    core_number = np.zeros(count + 1, np.int64)
    chosen = np.flatnonzero(touched & (sizes >= SMALLEST_CORE_VOXELS))
    core_number[chosen] = np.arange(1, len(chosen) + 1)
    cores = core_number[pieces]
    # Seed components without a core of their own are faint or tiny spots: their seeds stand for the core.
    for number in range(1, seed_count + 1):
        here = seed_pieces == number
        if not cores[here].any():
            cores[here] = cores.max() + 1
    if not cores.any():
        return
    distance, nearest = ndimage.distance_transform_edt(cores == 0, sampling=spacing, return_indices=True)
    owner = cores[tuple(nearest)]
    edge = ndimage.distance_transform_edt(inside, sampling=spacing) if not inside.all() else np.full(inside.shape, 1e6)
    for number in range(1, int(cores.max()) + 1):
        core = cores == number
        own = (owner == number) & (distance <= reach) & inside
        shell = (owner == number) & (distance > clear) & (distance <= clear + SHELL_VOXELS) & inside & (edge > clear)
        box = ndimage.find_objects((own | shell | core).astype(np.int8))[0]
        grown = tuple(slice(max(s.start - 1, 0), s.stop + 1) for s in box)
        middle = core[grown]
        yield Patch(
            start=low + np.array([s.start for s in grown]),
            darkness=darkness[grown],
            core=middle,
            past_half=(past_half & (owner == number) & (distance <= reach))[grown],
            own=own[grown],
            shell=shell[grown],
            distance_vox=np.where(owner == number, distance, 1e6)[grown],
            edge_vox=edge[grown],
            level=float(level[grown][middle].mean()),
        )
