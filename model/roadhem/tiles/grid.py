"""The working grid: 0.10 m ground pixels, anchored to the CRS's zero."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

PIXEL_M = 0.10
"""Side of a working pixel, in ground metres."""

OUTSIDE, NO_DATA, VALID = 0, 1, 2
"""Cover: what the tiles hold at a pixel."""

SCALE_STEP = 1.01
"""Scale factors are rounded to powers of this, so that a neighbouring tile does not shift the grid."""


@dataclass(frozen=True)
class WorkingGrid:
    """One grid for a whole run.

    Pixel (row r, column c) covers x in [c, c + 1) * cell and y in (-(r + 1) * cell, -r * cell] of the CRS; r and
    c are any integers, rows grow southward.

    "Grid metres" are CRS coordinates times `scale`: ground metres, x east, y north, zero at the CRS's zero. The
    tracer works in them alone.

    Attributes
    ----------
    scale : ground metres per CRS unit (a power of SCALE_STEP times the length of the unit in metres).
    """

    scale: float = 1.0

    @classmethod
    def for_scale(cls, metres_per_unit: float, point_scale: float = 1.0) -> WorkingGrid:
        """Return the grid for a CRS unit of `metres_per_unit` m and a point scale factor (map over ground)."""
        steps = round(math.log(1.0 / point_scale) / math.log(SCALE_STEP))
        return cls(metres_per_unit * SCALE_STEP**steps)

    @property
    def cell(self) -> float:
        """Side of a working pixel in CRS units."""
        return PIXEL_M / self.scale

    def to_metres(self, xy: ArrayLike) -> NDArray[np.float64]:
        """CRS coordinates (..., 2) to grid metres."""
        return np.asarray(xy, dtype=np.float64) * self.scale

    def to_crs(self, xy: ArrayLike) -> NDArray[np.float64]:
        """Grid metres (..., 2) to CRS coordinates."""
        return np.asarray(xy, dtype=np.float64) / self.scale
