"""The lattice a raster's pixels lie on, the same for every raster cut from one mosaic."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from affine import Affine
from numpy.typing import NDArray

SIGNIFICANT = 11
"""Digits of a pixel's size that count; what is beyond them is the noise of the program that wrote the file."""

PHASE_DIGITS = 4
"""Digits of a lattice's phase in pixels: 1e-4 px, 10 micrometres at 10 cm."""


@dataclass(frozen=True, order=True)
class Lattice:
    """Pixels of one size and phase, without an end.

    The corner of lattice pixel (row, col) that its indices grow away from lies at CRS position
    x = a * (col + u) + b * (row + v), y = d * (col + u) + e * (row + v).

    Attributes
    ----------
    a, b, d, e : the affine's linear part, CRS units per pixel.
    u, v : phase along columns and rows, in [0, 1) pixels.
    """

    a: float
    b: float
    d: float
    e: float
    u: float
    v: float

    @classmethod
    def of(cls, transform: Affine) -> tuple[Lattice, int, int]:
        """Return the lattice of a raster, from that raster alone, and the lattice (row, col) of its first pixel."""
        a, b, d, e = _rounded(transform.a, transform.b, transform.d, transform.e)
        determinant = a * e - b * d
        along = (e * transform.c - b * transform.f) / determinant
        down = (a * transform.f - d * transform.c) / determinant
        col, u = _split(along)
        row, v = _split(down)
        return cls(a, b, d, e, u, v), row, col

    @property
    def straight(self) -> bool:
        """Whether rows and columns run along the axes of the CRS."""
        return self.b == 0.0 and self.d == 0.0

    @property
    def sides(self) -> tuple[float, float]:
        """Lengths of a pixel's sides along a row and down a column, in CRS units."""
        return math.hypot(self.a, self.d), math.hypot(self.b, self.e)

    def corners(self, row: int, col: int, rows: int, cols: int) -> NDArray[np.float64]:
        """Corners (4, 2) of a block of pixels, in CRS units."""
        steps = np.array([(0, 0), (0, cols), (rows, cols), (rows, 0)], dtype=np.float64)
        down, along = row + self.v + steps[:, 0], col + self.u + steps[:, 1]
        return np.column_stack([self.a * along + self.b * down, self.d * along + self.e * down])


def _rounded(*terms: float) -> tuple[float, ...]:
    largest = max(abs(term) for term in terms)
    digits = SIGNIFICANT - 1 - math.floor(math.log10(largest))
    return tuple(round(term, digits) + 0.0 for term in terms)


def _split(position: float) -> tuple[int, float]:
    """Whole part and phase of a lattice position, the phase rounded to PHASE_DIGITS."""
    whole = math.floor(position)
    phase = round(position - whole, PHASE_DIGITS)
    return (whole + 1, 0.0) if phase >= 1.0 else (whole, phase)
