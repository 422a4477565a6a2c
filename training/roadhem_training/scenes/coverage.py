"""Exact pixel coverage of areas: how much of each pixel a polygon takes."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numba
import numpy as np
import shapely
from numpy.typing import ArrayLike, NDArray
from shapely.geometry.base import BaseGeometry

FAINT = 1e-4
"""Coverage below this is rounding error."""


@dataclass(frozen=True)
class Frame:
    """A north-up grid of square pixels over the world.

    Attributes
    ----------
    rows, cols : number of pixels.
    pixel : side of a pixel, metres.
    left, top : local metres of the upper left corner.
    """

    rows: int
    cols: int
    pixel: float
    left: float
    top: float

    @classmethod
    def of_size(cls, size: float, pixel: float, margin: float = 0.0) -> Frame:
        """Return the frame over a world of `size` metres, with `margin` metres more on every side."""
        count = round((size + 2 * margin) / pixel)
        return cls(count, count, pixel, -margin, size + margin)

    def to_pixels(self, xy: ArrayLike) -> NDArray[np.float64]:
        """Local metres (..., 2) to (column, row) with (0, 0) the upper left corner of the first pixel."""
        corner, scale = (self.left, self.top), (1 / self.pixel, -1 / self.pixel)
        return (np.asarray(xy, np.float64) - corner) * scale

    def window(self, bounds: Sequence[float], grow: float = 0.0) -> tuple[slice, slice] | None:
        """Rows and columns that hold `bounds` (minx, miny, maxx, maxy) grown by `grow` metres; None if outside."""
        minx, miny, maxx, maxy = bounds
        if not math.isfinite(minx + miny + maxx + maxy):
            return None
        c0 = max(math.floor((minx - grow - self.left) / self.pixel), 0)
        c1 = min(math.ceil((maxx + grow - self.left) / self.pixel), self.cols)
        r0 = max(math.floor((self.top - maxy - grow) / self.pixel), 0)
        r1 = min(math.ceil((self.top - miny + grow) / self.pixel), self.rows)
        return (slice(r0, r1), slice(c0, c1)) if r1 > r0 and c1 > c0 else None


@dataclass(frozen=True)
class Patch:
    """Coverage (0..1, float32) of an area in the window (rows, columns) of a frame."""

    window: tuple[slice, slice]
    cover: NDArray[np.float32]


def cover_area(area: BaseGeometry, frame: Frame, grow: float = 0.0) -> Patch | None:
    """Rasterise a polygon or multipolygon with exact area coverage.

    Parameters
    ----------
    area : polygon, multipolygon or collection (its polygons count), local metres.
    frame : where to.
    grow : metres by which the window exceeds the area.

    Returns
    -------
    Patch, or None where the area lies outside the frame or is empty.
    """
    if area.is_empty:
        return None
    window = frame.window(area.bounds, grow)
    if window is None:
        return None
    xy, starts, signs = polygon_rings(area)
    return Patch(window, cover_rings(xy, starts, signs, window, frame)) if len(signs) else None


def polygon_rings(area: BaseGeometry) -> tuple[NDArray[np.float64], NDArray[np.int64], NDArray[np.float64]]:
    """Flatten the rings of an area.

    Returns
    -------
    xy (n, 2), starts (m + 1,) offsets of the rings, signs (m,) +1 for outer rings and -1 for holes.
    """
    if area.geom_type == "Polygon" and shapely.get_num_interior_rings(area) == 0:
        xy = shapely.get_coordinates(area)
        return xy, np.array([0, len(xy)]), np.ones(1)
    parts = shapely.get_parts(area)
    parts = parts[shapely.get_type_id(parts) == shapely.GeometryType.POLYGON]
    rings, polygon = shapely.get_rings(parts, return_index=True)
    xy, ring = shapely.get_coordinates(rings, return_index=True)
    starts = np.searchsorted(ring, np.arange(len(rings) + 1))
    outer = np.ones(len(rings), bool)
    outer[1:] = polygon[1:] != polygon[:-1]
    return xy, starts, np.where(outer, 1.0, -1.0)


def cover_rings(
    xy: NDArray[np.float64],
    starts: NDArray[np.int64],
    signs: NDArray[np.float64],
    window: tuple[slice, slice],
    frame: Frame,
) -> NDArray[np.float32]:
    """Coverage of rings (as `polygon_rings` gives them) in a window of the frame; overlaps count once."""
    pixels = frame.to_pixels(xy) - (window[1].start, window[0].start)
    shape = (window[0].stop - window[0].start, window[1].stop - window[1].start)
    return _accumulate(pixels, starts, signs, shape[0], shape[1])


def inside(area: BaseGeometry, frame: Frame) -> NDArray[np.bool_]:
    """Tell which pixel centres lie inside an area: (rows, cols) bool."""
    xy, starts, _ = polygon_rings(area)
    return _scan_centres(frame.to_pixels(xy), starts, frame.rows, frame.cols)


@numba.njit(cache=True)
def _accumulate(xy, starts, signs, rows, cols):  # type: ignore[no-untyped-def]
    """Sum, per row, the signed area right of every ring side; the running sum along the row is the coverage."""
    area = np.zeros((rows, cols + 1), np.float32)
    for ring in range(len(signs)):
        first, last = starts[ring], starts[ring + 1]
        twice = 0.0
        for k in range(first, last - 1):
            twice += xy[k, 0] * xy[k + 1, 1] - xy[k + 1, 0] * xy[k, 1]
        sign = signs[ring] if twice > 0 else -signs[ring]
        for k in range(first, last - 1):
            _add_side(area, xy[k, 0], xy[k, 1], xy[k + 1, 0], xy[k + 1, 1], -sign)
    cover = np.empty((rows, cols), np.float32)
    for r in range(rows):
        total = 0.0
        for c in range(cols):
            total += area[r, c]
            value = min(max(total, 0.0), 1.0)
            cover[r, c] = value if value > FAINT else 0.0
    return cover


@numba.njit(cache=True)
def _add_side(area, x0, y0, x1, y1, sign):  # type: ignore[no-untyped-def]
    if y0 == y1:
        return
    if y0 > y1:
        x0, y0, x1, y1, sign = x1, y1, x0, y0, -sign
    rows, cols = area.shape[0], area.shape[1] - 1
    slope = (x1 - x0) / (y1 - y0)
    for r in range(max(int(np.floor(y0)), 0), min(int(np.ceil(y1)), rows)):
        ya, yb = max(y0, float(r)), min(y1, float(r + 1))
        if yb <= ya:
            continue
        xa, xb = x0 + (ya - y0) * slope, x0 + (yb - y0) * slope
        if xa > xb:
            xa, xb = xb, xa
        height = (yb - ya) * sign
        if xb <= 0.0:
            area[r, 0] += height
        elif xa < cols:
            _add_span(area, r, xa, xb, height, cols)


@numba.njit(cache=True)
def _add_span(area, r, xa, xb, height, cols):  # type: ignore[no-untyped-def]
    width = xb - xa
    for c in range(int(np.floor(xa)), min(int(np.floor(xb)), cols - 1) + 1):
        left, right = max(xa, float(c)), min(xb, float(c + 1))
        part = height * (right - left) / width if width > 0.0 else height
        if c < 0:
            area[r, 0] += part
        else:
            middle = 0.5 * (left + right) - c
            area[r, c] += part * (1.0 - middle)
            area[r, c + 1] += part * middle


@numba.njit(cache=True)
def _scan_centres(xy, starts, rows, cols):  # type: ignore[no-untyped-def]
    """Even-odd rule along the line through each row's centres."""
    flips = np.zeros((rows, cols), np.bool_)
    for ring in range(len(starts) - 1):
        for k in range(starts[ring], starts[ring + 1] - 1):
            x0, y0, x1, y1 = xy[k, 0], xy[k, 1], xy[k + 1, 0], xy[k + 1, 1]
            if y0 > y1:
                x0, y0, x1, y1 = x1, y1, x0, y0
            for r in range(max(int(np.ceil(y0 - 0.5)), 0), min(int(np.ceil(y1 - 0.5)), rows)):
                x = x0 + (r + 0.5 - y0) / (y1 - y0) * (x1 - x0)
                c = max(int(np.ceil(x - 0.5)), 0)
                if c < cols:
                    flips[r, c] = not flips[r, c]
    for r in range(rows):
        state = False
        for c in range(cols):
            state ^= flips[r, c]
            flips[r, c] = state
    return flips
