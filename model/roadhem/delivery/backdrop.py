"""A backdrop for pictures: any part of a mosaic at a size that a screen can hold, read block by block."""

from __future__ import annotations

import math
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from roadhem.fields.layout import COVER_VALID
from roadhem.tiles.grid import PIXEL_M
from roadhem.tiles.mosaic import Patch

BLOCK = 1024
"""Working pixels along a side of what is read at once, about."""
MOST = 2400
"""Pixels along a backdrop's longer side, at most."""

Bounds = tuple[float, float, float, float]


class Readable(Protocol):
    """What can be read as working pixels."""

    def read(self, row: int, col: int, rows: int, cols: int) -> Patch:
        """Return a window of working pixels."""


def backdrop(mosaic: Readable, bounds_m: Bounds, most: int = MOST) -> tuple[NDArray[np.float32], Bounds]:
    """Read a part of a mosaic, averaged to whole numbers of working pixels where it is large.

    Parameters
    ----------
    bounds_m : (minx, miny, maxx, maxy) grid metres.
    most : pixels along the longer side, at most.

    Returns
    -------
    (H, W, 4) colour and coverage in 0..1, and the bounds it exactly fills.
    """
    minx, miny, maxx, maxy = bounds_m
    col, row = math.floor(minx / PIXEL_M), math.floor(-maxy / PIXEL_M)
    cols, rows = math.ceil(maxx / PIXEL_M) - col, math.ceil(-miny / PIXEL_M) - row
    step = max(1, math.ceil(max(cols, rows) / most))
    wide, high = math.ceil(cols / step), math.ceil(rows / step)
    picture = np.zeros((high, wide, 4), np.float32)
    block = max(1, BLOCK // step)
    for top in range(0, high, block):
        for left in range(0, wide, block):
            tall, broad = min(block, high - top), min(block, wide - left)
            patch = mosaic.read(row + top * step, col + left * step, tall * step, broad * step)
            picture[top : top + tall, left : left + broad] = _averaged(patch, step)
    x0, y1 = col * PIXEL_M, -row * PIXEL_M
    return picture, (x0, y1 - high * step * PIXEL_M, x0 + wide * step * PIXEL_M, y1)


def _averaged(patch: Patch, step: int) -> NDArray[np.float32]:
    valid = (patch.cover == COVER_VALID).astype(np.float32)
    planes = np.concatenate([patch.colour * valid, valid[None]])
    _, rows, cols = planes.shape
    mean = planes.reshape(4, rows // step, step, cols // step, step).mean(axis=(2, 4))
    mean[:3] /= np.maximum(mean[3], 1e-6)
    return np.asarray(np.moveaxis(mean, 0, -1), dtype=np.float32)
