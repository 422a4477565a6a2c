"""Resampling onto the working grid: each output pixel depends on its own place alone, to the last bit."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numba import njit
from numpy.typing import NDArray

from roadhem.tiles.grid import NO_DATA, OUTSIDE, VALID

SNAP = 1e-6
"""Share of a pixel below which an overlap or a shift counts as none."""


@dataclass(frozen=True)
class Taps:
    """Source pixels and weights along one axis.

    Attributes
    ----------
    first : (n,) int64, first source index of each output index.
    weights : (n, k) float32, weights of `first` and the k - 1 that follow.
    """

    first: NDArray[np.int64]
    weights: NDArray[np.float32]

    @property
    def span(self) -> tuple[int, int]:
        """Half-open range of the source indices in use."""
        return int(self.first.min()), int(self.first.max()) + self.weights.shape[1]

    def __abs__(self) -> Taps:
        """The same taps with the size of each weight."""
        return Taps(self.first, np.abs(self.weights))


def axis_taps(start: int, count: int, step: float, pixel: float, phase: float, *, smooth: bool = False) -> Taps:
    """Taps for output indices start ... start + count - 1 along a straight axis.

    Area overlap where the source is finer than the output; else the cubic convolution of Catmull and Rom, or
    linear interpolation where `smooth` (heights, and colours beside missing pixels).

    Parameters
    ----------
    step : signed size of an output pixel in CRS units.
    pixel : signed size of a source pixel in CRS units.
    phase : the lattice's phase along this axis, in source pixels.
    """
    edges = np.arange(start, start + count + 1, dtype=np.float64) * step / pixel - phase
    low, high = np.minimum(edges[:-1], edges[1:]), np.maximum(edges[:-1], edges[1:])
    if abs(step / pixel) > 1.0 + SNAP:
        first, weights = _area(low, high, int(np.ceil(abs(step / pixel))) + 1)
    else:
        first, weights = _linear((low + high) / 2 - 0.5) if smooth else _cubic((low + high) / 2 - 0.5)
    total = np.zeros(count)
    for tap in weights.T:
        total += tap
    return _trimmed(first, weights / total[:, None])


def _area(
    low: NDArray[np.float64], high: NDArray[np.float64], taps: int
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    first = np.floor(low + SNAP)
    left = first[:, None] + np.arange(taps)
    weights = np.minimum(high[:, None], left + 1) - np.maximum(low[:, None], left)
    return first, np.where(weights > SNAP, weights, 0.0)


def _between(centre: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Index of the pixel centre at or before a position, and the share of the way to the next."""
    index = np.floor(centre + SNAP)
    share = centre - index
    return index, np.where(np.abs(share) < SNAP, 0.0, share)


def _linear(centre: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    first, t = _between(centre)
    return first, np.column_stack([1 - t, t])


def _cubic(centre: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Cubic convolution with a = -1/2 (Keys 1981, from memory)."""
    index, t = _between(centre)
    square, cube = t * t, t * t * t
    weights = (
        -0.5 * t + square - 0.5 * cube,
        1.0 - 2.5 * square + 1.5 * cube,
        0.5 * t + 2.0 * square - 1.5 * cube,
        -0.5 * square + 0.5 * cube,
    )
    return index - 1, np.column_stack(weights)


def _trimmed(first: NDArray[np.float64], weights: NDArray[np.float64]) -> Taps:
    """Drop taps that are zero everywhere: they change no bit and cost time."""
    used = np.flatnonzero((weights != 0.0).any(axis=0))
    kept = np.ascontiguousarray(weights[:, used[0] : used[-1] + 1], dtype=np.float32)
    return Taps((first + used[0]).astype(np.int64), kept)


def separable(
    source: NDArray[np.generic], origin: tuple[int, int], down: Taps, along: Taps
) -> NDArray[np.float32]:
    """Weighted sums of source planes.

    Parameters
    ----------
    source : (b, h, w), finite; it holds all that the taps reach.
    origin : lattice (row, col) of the source's first pixel.

    Returns
    -------
    (b, rows, cols) float32.
    """
    out = np.empty((source.shape[0], len(down.first), len(along.first)), np.float32)
    columns = np.ascontiguousarray(along.weights.T)
    _separable(source, down.first - origin[0], down.weights, along.first - origin[1], columns, out)
    return out


@njit(cache=True, nogil=True)
def _separable(source, first_row, row_weights, first_col, col_weights, out):  # type: ignore[no-untyped-def]
    planes, rows, cols = out.shape
    width = source.shape[2]
    line = np.empty(width, np.float32)
    for plane in range(planes):
        for r in range(rows):
            line[:] = np.float32(0)
            for i in range(row_weights.shape[1]):
                weight = row_weights[r, i]
                if weight != 0:
                    values = source[plane, first_row[r] + i]
                    for x in range(width):
                        line[x] += weight * np.float32(values[x])
            target = out[plane, r]
            for c in range(cols):
                target[c] = col_weights[0, c] * line[first_col[c]]
            for j in range(1, col_weights.shape[0]):
                for c in range(cols):
                    target[c] += col_weights[j, c] * line[first_col[c] + j]


@dataclass(frozen=True)
class Turn:
    """The way from the working grid to a turned lattice.

    Attributes
    ----------
    inverse : (2, 2) CRS units to lattice (col, row), before the phase.
    phase : (u, v).
    cell : side of a working pixel in CRS units.
    samples : sub-pixels a side that are averaged.
    """

    inverse: NDArray[np.float64]
    phase: tuple[float, float]
    cell: float
    samples: int

    def span(self, row: int, col: int, rows: int, cols: int) -> tuple[int, int, int, int]:
        """Lattice rows [top, bottom) and columns [left, right) that a window of working pixels needs."""
        corners = [(c, -r) for r in (row, row + rows) for c in (col, col + cols)]
        places = np.array(corners) * self.cell @ self.inverse.T - self.phase
        left, top = np.floor(places.min(axis=0)).astype(int) - 2
        right, bottom = np.ceil(places.max(axis=0)).astype(int) + 2
        return int(top), int(bottom), int(left), int(right)


def turned(
    source: NDArray[np.generic],
    missing: NDArray[np.uint8],
    origin: tuple[int, int],
    turn: Turn,
    window: tuple[int, int, int, int],
) -> tuple[NDArray[np.float32], NDArray[np.float32]]:
    """Average of bilinear samples on a turned lattice.

    Parameters
    ----------
    source, missing : (b, h, w) values and (k, h, w) flags.
    origin : lattice (row, col) of their first pixel.
    window : working (row, col, rows, cols).

    Returns
    -------
    sums, lost : (b, rows, cols) sums of weighted values and (k, rows, cols) sums of the weights under each flag.
    """
    sums = np.empty((source.shape[0], *window[2:]), np.float32)
    lost = np.empty((missing.shape[0], *window[2:]), np.float32)
    _turned(source, missing, origin, turn.inverse, turn.phase, turn.cell, window, turn.samples, sums, lost)
    return sums, lost


@njit(cache=True, nogil=True)
def _turned(source, missing, origin, inverse, phase, cell, window, samples, sums, lost):  # type: ignore[no-untyped-def]
    row, col, rows, cols = window
    share = 1.0 / (samples * samples)
    total = np.empty(source.shape[0])
    gone = np.empty(missing.shape[0])
    for r in range(rows):
        for c in range(cols):
            total[:] = 0.0
            gone[:] = 0.0
            for i in range(samples):
                y = -(row + r + (i + 0.5) / samples) * cell
                for j in range(samples):
                    x = (col + c + (j + 0.5) / samples) * cell
                    along = inverse[0, 0] * x + inverse[0, 1] * y - phase[0] - 0.5
                    down = inverse[1, 0] * x + inverse[1, 1] * y - phase[1] - 0.5
                    left, top = np.floor(along), np.floor(down)
                    u, v = along - left, down - top
                    h, w = int(top) - origin[0], int(left) - origin[1]
                    for k in range(2):
                        for m in range(2):
                            weight = (v if k else 1 - v) * (u if m else 1 - u) * share
                            for plane in range(source.shape[0]):
                                total[plane] += weight * source[plane, h + k, w + m]
                            for flag in range(missing.shape[0]):
                                gone[flag] += weight * missing[flag, h + k, w + m]
            for plane in range(source.shape[0]):
                sums[plane, r, c] = total[plane]
            for flag in range(missing.shape[0]):
                lost[flag, r, c] = gone[flag]


def settle(sums: NDArray[np.float32], lost: NDArray[np.float32]) -> NDArray[np.uint8]:
    """Make sums over footprints with missing pixels into values, in place, and return their cover.

    A pixel is valid when at least half of its weight is; the rest is scaled up to the whole.

    Parameters
    ----------
    sums : (b, rows, cols) sums of weighted valid values; on return values, 0 where not valid.
    lost : (2, rows, cols) weights of the pixels that are not valid, and of those outside the tiles.

    Returns
    -------
    (rows, cols) cover.
    """
    cover = np.empty(lost.shape[1:], np.uint8)
    _settle(sums, lost, cover)
    return cover


@njit(cache=True, nogil=True)
def _settle(sums, lost, cover):  # type: ignore[no-untyped-def]
    half, one = np.float32(0.5), np.float32(1)
    for r in range(cover.shape[0]):
        for c in range(cover.shape[1]):
            gone = lost[0, r, c]
            if gone <= half:
                cover[r, c] = VALID
                if gone != 0:
                    for plane in range(sums.shape[0]):
                        sums[plane, r, c] /= one - gone
            else:
                cover[r, c] = OUTSIDE if lost[1, r, c] > half else NO_DATA
                for plane in range(sums.shape[0]):
                    sums[plane, r, c] = 0
