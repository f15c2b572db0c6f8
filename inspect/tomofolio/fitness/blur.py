"""Blur, read off the object's own outer edges.

The way of ASTM E1695 (edge response → point spread → modulation transfer function), carried over to three dimensions:
at many points of the surface an edge is fitted to the values of a small neighbourhood; edges that face different ways
share one blur per axis. The blurred edge in a neighbourhood is

    v = a + b·Φ(t/s) + c·s·(u·Φ(u) + φ(u)),   u = t/s,
    t = w − d − α·p − β·q − (κ₁·p² + 2·κ₁₂·p·q + κ₂·q²)/2,

with w along the surface's normal n, p and q across it, in mm; a and b local levels, c a trend of the material's level
with depth (beam hardening), κ the surface's curvature. All but s belong to the one neighbourhood; the width is common:

    s² = Σ σ_axis² · (n·e_axis)²,   e = unit vectors of increasing slice, row and column index,

the spread along n of a Gaussian whose width along the grid's axes is σ_axis. This holds for unequal spacing and for a
slice axis that is not perpendicular to the slices. Gauss–Newton steps on all parameters at once, the local ones
eliminated by the Schur complement.

σ is that of the whole edge response: what the scanner blurs, and the width of the voxel itself (a box of width h
adds h²/12 to σ²).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from tomofolio.body.result import Body
from tomofolio.fitness.edges import Patches, ball_radius, surface_patches
from tomofolio.fitness.samples import flagged_first
from tomofolio.volume import Grid, Volume

Array = NDArray[np.float64]

#: Fewest edges that the fit may rest on.
FEWEST_EDGES = 12
#: An axis counts as measured when its σ² is known to this share of itself, and the blur as a whole when the geometric
#: mean of the σ is (one standard deviation).
_LARGEST_AXIS_ERROR, _LARGEST_ERROR = 0.2, 0.1
#: Up to this ratio of its sides a voxel is near enough to a cube for one axis to be judged by the others.
_NEARLY_CUBIC = 1.6
#: What is expected before a look at the values (one standard deviation), so that noise is not mistaken for shape:
#: curvature, in pixels⁻¹; trend of the level, in steps per pixel; difference between the axes' σ², in their mean.
_CURVATURE, _TREND, _UNLIKE = 1 / 16, 0.02, 0.3
#: Most voxels of a patch that are fitted.
_MOST_VOXELS = 640


@dataclass(frozen=True)
class Blur:
    """Blur along [slice, row, column].

    Parameters
    ----------
    axes_mm : σ in mm.
    measured : which of them the edges bear out; the others rest on the expectation that the axes are alike.
    error : relative standard error of the geometric mean.
    edges : number of edges used.
    """

    axes_mm: tuple[float, float, float]
    measured: tuple[bool, bool, bool]
    error: float
    edges: int

    @property
    def mean_mm(self) -> float:
        """Geometric mean of the axes."""
        return float(np.prod(self.axes_mm) ** (1 / 3))


def measure_blur(
    volume: Volume,
    body: Body,
    contrast: float,
    noise_correlation: tuple[float, float, float],
    cleared: float | None = None,
) -> Blur | None:
    """Blur along the three axes of the grid; None where there are too few clean edges or they disagree.

    Parameters
    ----------
    contrast : difference between material and background that a whole edge is expected to have, in the scan's unit.
    noise_correlation : σ of the filter that makes the noise from white noise, [slice, row, column], in voxels.
    cleared : value that everything faint was set to, where that was done. The foot of the edges is missing then: these
        voxels are left out, and the edges are held to start from this value.
    """
    patches = surface_patches(volume, body)
    if len(patches) < FEWEST_EDGES:
        return None
    # Noise that hangs together is worth fewer voxels: the sum of its autocorrelation says how many count as one.
    together = float(np.prod([max(1.0, 2 * np.sqrt(np.pi) * sigma) for sigma in noise_correlation]))
    fit = _EdgeFit(volume.grid, patches, together, cleared is not None)
    fit.settle_planes()
    fit.keep(fit.plausible_planes())
    if len(fit.patches) < FEWEST_EDGES:
        return None
    if cleared is not None:
        fit.leave_out(cleared)
    fit.choose_voxels()
    for _ in range(3):
        fit.step(robust=False)
    for steps in (3, 2):
        fit.keep(fit.plausible_edges(contrast))
        if len(fit.patches) < FEWEST_EDGES:
            return None
        fit.choose_voxels()
        for _ in range(steps):
            fit.step(robust=True)
    return fit.result()


class _EdgeFit:
    """State of the common fit: local parameters per patch, σ² per axis for all."""

    def __init__(self, grid: Grid, patches: Patches, together: float, hold_air: bool) -> None:
        self.grid = grid
        self.patches = patches
        self.together = together
        self.hold_air = hold_air
        self.pixel = float(np.sqrt(grid.row_spacing_mm * grid.column_spacing_mm))
        self.spacing = np.array(grid.spacing_mm)
        self.axes = np.stack((grid.direction[:, 2], grid.direction[:, 1], grid.direction[:, 0]))
        self.normal = patches.inwards.copy()
        self.squares = (0.9 * self.spacing) ** 2
        # d, α, β, κ₁, κ₁₂, κ₂, a, b, c
        self.local = np.zeros((len(patches), 9))
        self.local[:, 6] = patches.air
        self.local[:, 7] = patches.material - patches.air
        self.rms = np.zeros(len(patches))
        self.pattern = np.zeros(len(patches))
        self.own = np.zeros(len(patches))
        self.weight = np.ones(len(patches))
        self.used = np.ones(len(patches))
        self.covariance = np.eye(3)

    def keep(self, which: NDArray[np.bool_]) -> None:
        """Go on with some of the patches."""
        self.patches = self.patches.take(which)
        for name in ("normal", "local", "rms", "pattern", "own", "weight", "used"):
            setattr(self, name, getattr(self, name)[which])

    def leave_out(self, cleared: float) -> None:
        """Set aside the voxels that hold the cleared value."""
        tolerance = 1e-6 * np.abs(self.local[:, 7:8])
        kept = self.patches.usable & (np.abs(self.patches.value - cleared) > tolerance)
        self.patches = replace(self.patches, usable=kept)
        self.local[:, 6] = cleared

    def _mixture(self) -> Array:
        """Shape (patches, 3): what each axis' σ² counts for along the normals."""
        return (self.normal @ self.axes.T) ** 2

    def _width(self) -> Array:
        """Shape (patches,): s along the normals."""
        return np.sqrt(np.maximum(self._mixture() @ self.squares, (0.15 * self.pixel) ** 2))

    def _voxel(self) -> Array:
        """Shape (patches,): how far one voxel reaches along the normals, mm."""
        return np.sqrt(self._mixture() @ self.spacing**2)

    def settle_planes(self) -> None:
        """Find the planes with levels and blur held, turning the normals step by step."""
        from scipy.special import ndtr

        near = np.linalg.norm(self.patches.position, axis=-1) <= ball_radius(self.grid)
        air, step = self.patches.air[:, None], (self.patches.material - self.patches.air)[:, None]
        at = flagged_first(near & self.patches.usable, _MOST_VOXELS)
        weight = np.take_along_axis(near & self.patches.usable, at, axis=1)
        position = np.take_along_axis(self.patches.position, at[..., None], axis=1)
        relative = (np.take_along_axis(self.patches.value, at, axis=1) - air) / step
        offset = self.local[:, 0]
        for _ in range(5):
            s = self._width()[:, None]
            u = (np.matmul(position, self.normal[..., None])[..., 0] - offset[:, None]) / s
            slope = np.exp(-0.5 * u * u) / (s * np.sqrt(2 * np.pi)) * weight
            left = (relative - ndtr(u)) * weight
            # Parameters: the vector n (three components) and d; t = n·x − d.
            design = np.concatenate((position, -np.ones((*at.shape, 1))), axis=2) * slope[..., None]
            gram = design.transpose(0, 2, 1) @ design
            gram += 1e-3 * np.trace(gram, axis1=1, axis2=2)[:, None, None] * np.eye(4) / 4 + 1e-12 * np.eye(4)
            change = np.linalg.solve(gram, np.matmul(left[:, None, :], design)[:, 0, :, None])[..., 0]
            turn = change[:, :3] - np.einsum("px,px->p", change[:, :3], self.normal)[:, None] * self.normal
            self.normal = self.normal + np.clip(turn, -0.3, 0.3)
            self.normal /= np.linalg.norm(self.normal, axis=1)[:, None]
            offset = offset + np.clip(change[:, 3], -self.pixel, self.pixel)
        self.local[:, 0] = offset

    def plausible_planes(self) -> NDArray[np.bool_]:
        """Planes that pass near the middle of their boxes and part what is object from what is outside.

        Voxels on the wrong side of the plane, by more than the sag of a surface with a radius of eight pixels,
        show corners and neighbouring walls; noise puts some there too, alike for all planes.
        """
        voxel = self._voxel()
        position, side = self.patches.position, self.patches.side
        t = np.matmul(position, self.normal[..., None])[..., 0] - self.local[:, :1]
        across = np.maximum(np.einsum("pvx,pvx->pv", position, position) - t * t, 0)
        beyond = np.abs(t) > 1.5 * voxel[:, None] + across / (16 * self.pixel)
        near = across <= (1.25 * ball_radius(self.grid)) ** 2
        counted = beyond & near & (side != 0)
        wrong = np.sum(counted & ((side > 0) != (t > 0)), axis=1) / np.maximum(counted.sum(axis=1), 1)
        good = wrong <= np.median(wrong) + 0.015
        return good & (np.abs(self.local[:, 0]) <= 2.5 * voxel)

    def choose_voxels(self) -> None:
        """Voxels to fit: within 4 σ of the edge (at least three, at most six voxels), and near in the plane."""
        helper = np.eye(3)[np.argmin(np.abs(self.normal), axis=1)]
        first = np.cross(self.normal, helper)
        first /= np.linalg.norm(first, axis=1)[:, None]
        frame = np.stack((self.normal, first, np.cross(self.normal, first)), axis=2)
        turned = self.patches.position @ frame
        voxel = self._voxel()
        reach = np.clip(4.0 * self._width(), 3.0 * voxel, 6.0 * voxel)[:, None]
        chosen = np.abs(turned[..., 0] - self.local[:, :1]) <= reach
        chosen &= turned[..., 1] ** 2 + turned[..., 2] ** 2 <= ball_radius(self.grid) ** 2
        chosen &= self.patches.usable
        at = flagged_first(chosen, _MOST_VOXELS)
        self.chosen = np.take_along_axis(chosen, at, axis=1).astype(np.float64)
        self.value = np.take_along_axis(self.patches.value, at, axis=1)
        self.w, self.p, self.q = (np.take_along_axis(turned[..., n], at, axis=1) for n in range(3))
        third = ball_radius(self.grid) / 3
        self.cell = 9 * (self.w > self.local[:, :1]) + 4 + 3 * np.sign(np.trunc(self.p / third)).astype(np.int64)
        self.cell += np.sign(np.trunc(self.q / third)).astype(np.int64)

    def step(self, robust: bool) -> None:
        """One Gauss–Newton step on everything."""
        s = self._width()[:, None]
        left, design = self._model(s)
        gram = design.transpose(0, 2, 1) @ design
        pull = np.matmul(left[:, None, :], design)[:, 0]
        count = np.maximum(self.chosen.sum(axis=1), 1)
        height = np.abs(self.local[:, 7])
        self.rms = np.maximum(np.sqrt(np.einsum("pv,pv->p", left, left) / count), 1e-3 * height)
        self.pattern = self._pattern(left) / height
        doubt = self.rms**2 * self.together
        ties = np.zeros((len(gram), 9))
        ties[:, 3:6] = (doubt / (_CURVATURE / self.pixel) ** 2)[:, None]
        ties[:, 8] = doubt / (_TREND * height / self.pixel) ** 2
        if self.hold_air:
            ties[:, 6] = 1e4 * gram[:, 6, 6]
        inner = gram[:, :9, :9].copy()
        inner[:, np.arange(9), np.arange(9)] += ties + 1e-9 * np.einsum("pxx->px", inner) + 1e-12
        expected = np.zeros_like(self.local)
        if self.hold_air:
            expected[:, 6] = self.local[:, 6]
        pull[:, :9] -= ties * (self.local - expected)
        side = gram[:, :9, 9]
        solved = np.linalg.solve(inner, np.stack((side, pull[:, :9]), axis=2))
        information = np.maximum(gram[:, 9, 9] - np.einsum("px,px->p", side, solved[..., 0]), 1e-30)
        score = pull[:, 9] - np.einsum("px,px->p", side, solved[..., 1])
        mixture = self._mixture()
        now = mixture @ self.squares
        self.own = now + score / information
        # Weights must not follow the noise in a patch's own height and residual, or the mean leans one way.
        self.weight = information * (np.median(height) / np.maximum(height, 1e-12)) ** 2 / np.median(doubt)
        squares = np.clip(self._solve(mixture, robust), 0.25 * self.squares, 4 * self.squares)
        self.squares = np.clip(squares, (0.2 * self.spacing) ** 2, (6 * self.spacing) ** 2)
        update = solved[..., 1] - solved[..., 0] * (mixture @ self.squares - now)[:, None]
        limit = np.array([self.pixel, 0.2, 0.2, *(3 * [0.05 / self.pixel])])
        update[:, :6] = np.clip(update[:, :6], -limit, limit)
        self.local = self.local + update

    def _pattern(self, left: Array) -> Array:
        """Root mean square of the residual's means over 18 cells (two sides, 3 × 3 across): what noise averages out."""
        patches = np.arange(len(left))[:, None]
        at = (18 * patches + self.cell).ravel()
        total = np.bincount(at, left.ravel(), minlength=18 * len(left)).reshape(-1, 18)
        count = np.bincount(at, self.chosen.ravel(), minlength=18 * len(left)).reshape(-1, 18)
        return np.sqrt(np.sum(total**2 / np.maximum(count, 1), axis=1) / np.maximum(count.sum(axis=1), 1))

    def _model(self, s: Array) -> tuple[Array, Array]:
        """What is left of the values, and its derivatives: shapes (patches, voxels), (patches, voxels, 10)."""
        from scipy.special import ndtr

        d, alpha, beta, k1, k12, k2, a, b, c = (column[:, None] for column in self.local.T)
        p, q = self.p, self.q
        u = (self.w - d - alpha * p - beta * q - 0.5 * (k1 * p * p + 2 * k12 * p * q + k2 * q * q)) / s
        bell = np.exp(-0.5 * u * u) / np.sqrt(2 * np.pi) * self.chosen
        step = ndtr(u) * self.chosen
        ramp = s * (u * step + bell)
        left = (self.value - a) * self.chosen - b * step - c * ramp
        along = b * bell / s + c * step
        design = np.empty((*left.shape, 10))
        design[..., 0] = -along
        design[..., 1] = -along * p
        design[..., 2] = -along * q
        design[..., 3] = -0.5 * along * p * p
        design[..., 4] = -along * p * q
        design[..., 5] = -0.5 * along * q * q
        design[..., 6] = self.chosen
        design[..., 7] = step
        design[..., 8] = ramp
        # dv/d(s²): b·φ·(−u/s)/(2s) for the step, c·φ/(2s) for the ramp.
        design[..., 9] = (c - b * u / s) * bell / (2 * s)
        return left, design

    def _solve(self, mixture: Array, robust: bool) -> Array:
        """σ² per axis from the patches' own s², weighted; with Tukey's biweight against edges that are not clean."""
        used = self.weight
        squares, spread = self.squares, 1.0
        for _ in range(5 if robust else 2):
            gram = np.einsum("p,px,py->xy", used, mixture, mixture) / spread**2
            pull = np.einsum("p,px,p->x", used, mixture, self.own) / spread**2
            # The expectation that the axes are not too unlike carries an axis that few edges face.
            mean = float(squares.mean())
            tie = self._expected(mean)
            squares = np.linalg.solve(gram + tie, pull + 1e-3 / mean)
            deviation = (self.own - mixture @ squares) * np.sqrt(self.weight)
            spread = max(0.3, 1.4826 * float(np.median(np.abs(deviation))))
            if robust:
                used = self.weight * np.clip(1 - (deviation / (4.7 * spread)) ** 2, 0, None) ** 2
        self.used = used
        self.covariance = np.linalg.inv(gram + tie)
        return squares

    def _expected(self, mean: float) -> Array:
        """Weights of the expectation that the σ² of the axes are alike, the less so the less cubic the voxels are."""
        unlike = _UNLIKE * float(self.spacing.max() / self.spacing.min()) ** 2 * mean
        return (np.eye(3) - 1 / 3) / unlike**2 + 1e-3 * np.eye(3) / mean**2

    def plausible_edges(self, contrast: float) -> NDArray[np.bool_]:
        """Edges that are single, nearly plane, and as high as edges of this object are."""
        b = np.abs(self.local[:, 7])
        good = np.ones(len(b), dtype=bool)
        # Noise stays within these bounds; corners, neighbours and voids do not.
        for misfit, share in ((self.rms / b, 0.25), (self.pattern, 0.4)):
            middle = float(np.median(misfit))
            spread = 1.4826 * float(np.median(np.abs(misfit - middle)))
            good &= misfit <= middle + max(min(3 * spread, share * middle), 0.004)
        good &= b >= 0.4 * max(contrast, float(np.median(b)))
        good &= np.abs(self.local[:, 6] - np.median(self.local[:, 6])) <= 0.25 * np.median(b)
        good &= np.abs(self.local[:, 3:6]).max(axis=1) <= 1 / (8 * self.pixel)
        good &= np.abs(self.local[:, 0]) <= 3 * self._voxel()
        good &= np.abs(self.local[:, 8]) <= 0.08 * b / self.pixel
        good &= self.chosen.sum(axis=1) >= 60
        return good

    def result(self) -> Blur | None:
        """The common blur, where the edges bear it out."""
        relative = self.covariance / np.outer(self.squares, self.squares)
        # σ = √(σ²): half the relative error; a third of each axis' in the geometric mean.
        error = float(np.sqrt(relative.sum()) / 6)
        measured = np.sqrt(np.diag(relative)) <= _LARGEST_AXIS_ERROR
        measured &= self.squares > (0.25 * self.spacing) ** 2
        edges = int(np.count_nonzero(self.used > 0))
        if edges < FEWEST_EDGES or error > _LARGEST_ERROR:
            return None
        # What the other axes show says nothing about slices that lie far apart.
        if not measured.all() and self.spacing.max() > _NEARLY_CUBIC * self.spacing.min():
            return None
        axes = np.sqrt(self.squares)
        return Blur(
            (float(axes[0]), float(axes[1]), float(axes[2])),
            (bool(measured[0]), bool(measured[1]), bool(measured[2])),
            error,
            edges,
        )
