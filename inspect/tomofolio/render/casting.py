"""The ray kernel: walks every ray from the front of the scan to its back. `rays` says what it computes."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from tomofolio.render.sampling import careful_gradient, careful_trilinear, gradient, kernel, trilinear
from tomofolio.render.stepping import (
    FAINT,
    FARTHEST,
    HALF,
    NOTHING,
    ONE,
    OPAQUE,
    RELIGHT,
    STRIDE,
    THIN,
    TILE,
    UNIFORM,
    VISIBLE,
    ZERO,
    average,
    axis_limits,
    between,
    cell_of,
    jitter_of,
    needs_care,
    opacity,
    settle,
    shape_light,
    slice_exit,
    stretch_exit,
)

Array = NDArray[Any]


@kernel
def cast_rows(
    stored: Array,
    hidden: Array,
    hidden_from: int,
    slices: int,
    rows: int,
    columns: int,
    scale: Array,
    offset: Array,
    empty: float,
    knots: Array,
    finder: Array,
    refine: float,
    even: bool,
    blocks: Array,
    block_plateau: Array,
    integrals: Array,
    plateau: Array,
    geometry: Array,
    step_mm: float,
    normal: Array,
    light: Array,
    first_row: int,
    last_row: int,
    out: Array,
) -> None:
    """Cast the rays of some picture rows, tile by tile so that neighbouring rays share cached voxels.

    Parameters
    ----------
    blocks : flat, uint8, by slice, row and column of blocks; see the constants above.
    block_plateau : flat, int32, the plateau of every uniform block.
    integrals : shape (entries, 4), running integrals of density and density × colour.
    plateau : shape (entries,): number of the plateau (equal entries) an entry lies on and is thin enough to be lit
        evenly; −1 elsewhere. Stretches on one plateau are summed and composited at once.
    geometry : shape (4, 3), index space: start of the first ray, steps to the next pixel to the right and down, and
        one step along the ray.
    light : see `rays.light_numbers`.
    """
    f = np.float32
    layer = rows * columns
    block_rows, block_columns = (rows - 2) // 8 + 1, (columns - 2) // 8 + 1
    last_entry = integrals.shape[0] - 1
    highest = f(last_entry)
    step_z, step_y, step_x = geometry[3, 0], geometry[3, 1], geometry[3, 2]
    dz, dy, dx = f(step_z), f(step_y), f(step_x)
    iz = ONE / dz if abs(dz) > 1e-9 else f(1e12)
    iy = ONE / dy if abs(dy) > 1e-9 else f(1e12)
    ix = ONE / dx if abs(dx) > 1e-9 else f(1e12)
    ambient, diffuse, specular = light[6], light[7], light[8]
    fade_step, fade_start = light[11], light[12]
    neutral, surface_from = light[16], light[17]

    for tile in range(0, out.shape[1], TILE):
        for py in range(first_row, last_row):
            for px in range(tile, min(tile + TILE, out.shape[1])):
                start_z = geometry[0, 0] + px * geometry[1, 0] + py * geometry[2, 0]
                start_y = geometry[0, 1] + px * geometry[1, 1] + py * geometry[2, 1]
                start_x = geometry[0, 2] + px * geometry[1, 2] + py * geometry[2, 2]
                in_z, out_z = axis_limits(start_z, step_z, float(knots[slices - 1]))
                in_y, out_y = axis_limits(start_y, step_y, rows - 1.0)
                in_x, out_x = axis_limits(start_x, step_x, columns - 1.0)
                u_in, u_out = max(in_z, in_y, in_x), min(out_z, out_y, out_x)
                if not u_in < u_out:
                    continue
                jitter = jitter_of(px, py)
                origin = u_in + jitter  # from here on u counts steps from the first whole sample
                bz = f(start_z + origin * step_z)
                by = f(start_y + origin * step_y)
                bx = f(start_x + origin * step_x)
                end = f(u_out - origin)
                fade_base = fade_start + f(origin) * fade_step
                through, red, green, blue = ONE, ZERO, ZERO, ZERO
                u, n = f(-jitter), 0  # where the ray stands, and its next whole sample
                stop = -1  # the last whole sample in the block where the ray stands
                known, v0, landing = False, ZERO, ZERO
                lit, gloss, unlit = neutral, ZERO, ONE
                code, k, j, i, fz, block, uniform = 0, 0, 0, 0, ZERO, np.uint64(0), False
                waiting, waiting_on, middle = ZERO, 0, ZERO  # length on a plateau, not composited yet, and its moment
                while u < end:
                    # 1. a new block: leap over it where it is clear
                    if not known or n > stop + 1:
                        if not known:
                            z, y, x = bz + u * dz, by + u * dy, bx + u * dx
                            k, fz = cell_of(z, knots, finder, refine, even)
                            j, i = min(int(y), rows - 2), min(int(x), columns - 2)
                        bk, bj, bi = k >> 3, j >> 3, i >> 3
                        block = np.uint64((bk * block_rows + bj) * block_columns + bi)
                        code = int(blocks[block])
                        reach = 1
                        if code <= UNIFORM + FARTHEST:
                            reach = max(code if code <= FARTHEST else code - UNIFORM, 1)
                        leave = slice_exit((bk - reach + 1) * 8, (bk + reach) * 8, knots, bz, iz)
                        leave = min(leave, stretch_exit((bj - reach + 1) * 8, (bj + reach) * 8, rows, by, iy))
                        leave = min(leave, stretch_exit((bi - reach + 1) * 8, (bi + reach) * 8, columns, bx, ix))
                        landing = min(leave, end)
                        stop = int(landing + ONE) - 1  # rounded down; it is above −1 (math.floor is a call)
                        if leave < end:
                            landing = f(stop)
                        if VISIBLE < code <= FARTHEST and landing > u:
                            u, n, known, unlit = landing, stop + 1, False, ONE
                            continue
                        uniform = bool(UNIFORM < code <= UNIFORM + FARTHEST and landing > u)
                        if not known and not uniform:
                            o = (k * rows + j) * columns + i
                            if needs_care(code, hidden_from):
                                v0 = careful_trilinear(
                                    stored, hidden, hidden_from, slices, rows, columns,
                                    k, j, i, fz, y - f(j), x - f(i), scale, offset, empty,
                                )  # fmt: skip
                            else:
                                v0 = trilinear(stored, o, columns, layer, k, fz, y - f(j), x - f(i), scale, offset)
                            v0 = min(max(v0, ZERO), highest)
                            known = True
                    careful = needs_care(code, hidden_from)
                    stride = STRIDE if code == THIN else 1
                    on = block_plateau[block] if uniform else plateau[np.uint64(v0)]
                    t, v1, read = u, v0, False
                    # 2. matter that is all alike only adds to what waits
                    if on >= 0:
                        if waiting > ZERO and on != waiting_on:
                            red, green, blue, through = settle(
                                red, green, blue, through, waiting, middle, waiting_on,
                                integrals, step_mm, fade_base, light,
                            )  # fmt: skip
                            waiting = middle = ZERO
                        if uniform:
                            t, n, known = landing, stop + 1, False
                        elif not careful:
                            while n + stride <= stop + 1:
                                at = f(n + stride - 1)
                                z, y, x = bz + at * dz, by + at * dy, bx + at * dx
                                k, fz = cell_of(z, knots, finder, refine, even)
                                j, i = min(int(y), rows - 2), min(int(x), columns - 2)
                                o = (k * rows + j) * columns + i
                                v1 = trilinear(stored, o, columns, layer, k, fz, y - f(j), x - f(i), scale, offset)
                                v1 = min(max(v1, ZERO), highest)
                                n += stride
                                read = plateau[np.uint64(v1)] != on
                                if read:
                                    break
                                t, v0 = at, v1
                        if t > u:
                            waiting_on, unlit = on, ONE
                            waiting += t - u
                            middle += (t - u) * HALF * (u + t)
                            u = t
                            if not read:
                                continue
                    # 3. the value at the far end of a stretch of its own
                    if read:
                        t = f(n - 1)
                    else:
                        n += stride if n + stride <= stop + 1 else 1
                        t = min(f(n - 1), end)
                        z, y, x = bz + t * dz, by + t * dy, bx + t * dx
                        k, fz = cell_of(z, knots, finder, refine, even)
                        j, i = min(int(y), rows - 2), min(int(x), columns - 2)
                        if n > stop + 1:
                            beyond = np.uint64(((k >> 3) * block_rows + (j >> 3)) * block_columns + (i >> 3))
                            careful = careful or needs_care(int(blocks[beyond]), hidden_from)
                        if careful:
                            v1 = careful_trilinear(
                                stored, hidden, hidden_from, slices, rows, columns,
                                k, j, i, fz, y - f(j), x - f(i), scale, offset, empty,
                            )  # fmt: skip
                        else:
                            o = (k * rows + j) * columns + i
                            v1 = trilinear(stored, o, columns, layer, k, fz, y - f(j), x - f(i), scale, offset)
                        v1 = min(max(v1, ZERO), highest)
                        if on >= 0 and plateau[np.uint64(v1)] == on:
                            waiting_on, unlit = on, ONE
                            waiting += t - u
                            middle += (t - u) * HALF * (u + t)
                            u, v0 = t, v1
                            continue
                    # 4. what waits comes before it
                    if waiting > ZERO:
                        red, green, blue, through = settle(
                            red, green, blue, through, waiting, middle, waiting_on,
                                integrals, step_mm, fade_base, light,
                        )  # fmt: skip
                        waiting = middle = ZERO
                    # 5. one more value half-way: where the table bends, the value does not run straight
                    um = HALF * (u + t)
                    zm, ym, xm = bz + um * dz, by + um * dy, bx + um * dx
                    km, fm = cell_of(zm, knots, finder, refine, even)
                    jm, im = min(int(ym), rows - 2), min(int(xm), columns - 2)
                    o = (km * rows + jm) * columns + im
                    thick = average(integrals, v0, v1)
                    if thick * (t - u) * step_mm < FAINT:
                        vm = HALF * (v0 + v1)
                    elif careful:
                        vm = careful_trilinear(
                            stored, hidden, hidden_from, slices, rows, columns,
                            km, jm, im, fm, ym - f(jm), xm - f(im), scale, offset, empty,
                        )  # fmt: skip
                    else:
                        vm = trilinear(stored, o, columns, layer, km, fm, ym - f(jm), xm - f(im), scale, offset)
                    vm = min(max(vm, ZERO), highest)
                    for part in range(2):
                        va, vb = (vm, v1) if part else (v0, vm)
                        if abs(vb - va) < HALF:  # too close for a difference of integrals: one table step around them
                            va = min(max(HALF * (va + vb), HALF), highest - HALF) - HALF
                            vb = va + ONE
                        inverse = ONE / (vb - va)
                        thick = inverse * between(integrals, 0, va, vb)
                        depth = thick * HALF * (t - u) * step_mm
                        if depth <= NOTHING:
                            continue
                        a = opacity(depth)
                        weight = through * a
                        haze = min(max(fade_base + um * fade_step, ZERO), ONE)
                        if thick <= surface_from:
                            lit, gloss, unlit = neutral, ZERO, ONE
                        elif unlit + weight > RELIGHT:
                            unlit = ZERO
                            inner = km > 0 and jm > 0 and im > 0
                            inner = inner and km < slices - 2 and jm < rows - 2 and im < columns - 2
                            if careful or not inner:
                                gz, gy, gx = careful_gradient(
                                    stored, hidden, hidden_from, slices, rows, columns,
                                    km, jm, im, fm, ym - f(jm), xm - f(im), scale, offset, knots, empty,
                                )  # fmt: skip
                            else:
                                gz, gy, gx = gradient(
                                    stored, o, columns, layer, km, fm, ym - f(jm), xm - f(im), scale, offset, knots
                                )  # fmt: skip
                            sure, lit, gloss = shape_light(gz, gy, gx, normal, light)
                            sure *= min((thick - surface_from) / (surface_from + f(1e-12)), ONE)
                            lit = neutral + sure * (ambient + diffuse * lit - neutral)
                            gloss *= sure * specular
                        else:
                            unlit += weight
                        shine = weight * (ONE - haze)
                        keep = shine * lit * inverse / thick
                        shine *= gloss
                        haze *= weight
                        red += keep * between(integrals, 1, va, vb) + shine + haze * light[13]
                        green += keep * between(integrals, 2, va, vb) + shine + haze * light[14]
                        blue += keep * between(integrals, 3, va, vb) + shine + haze * light[15]
                        through *= ONE - a
                    u, v0 = t, v1
                    if through < OPAQUE:
                        break
                if waiting > ZERO:
                    red, green, blue, through = settle(
                        red, green, blue, through, waiting, middle, waiting_on,
                                integrals, step_mm, fade_base, light,
                    )  # fmt: skip
                out[py, px, 0] = red
                out[py, px, 1] = green
                out[py, px, 2] = blue
                out[py, px, 3] = ONE - through
