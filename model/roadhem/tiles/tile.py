"""A tile: pixels with a place, from a file or from an array."""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass, field
from functools import cached_property
from itertools import chain, product
from pathlib import Path

import numpy as np
from affine import Affine
from numpy.typing import ArrayLike, NDArray
from pyproj import CRS

from roadhem.errors import BadInput
from roadhem.tiles.lattice import Lattice

SAMPLE_PIXELS = 2048
"""Tiles up to this many pixels a side are looked at whole when their brightness is measured."""

SAMPLE_WINDOWS = 12
"""Larger ones are looked at in this many windows a side, SAMPLE_WINDOW pixels each."""
SAMPLE_WINDOW = 128

STRETCH_PERCENT = (2.0, 98.0)
"""Percentiles brought to 0 and 1 where the values are not 8-bit."""

Pixels = tuple[NDArray[np.generic], "NDArray[np.bool_] | None"]
"""Values (planes, h, w), and where they are valid (h, w): None where all are."""


@dataclass(kw_only=True, eq=False)
class Tile(ABC):
    """Pixels with a place.

    Attributes
    ----------
    name : for sentences and for the lines' source.
    crs : the horizontal CRS.
    transform : pixel (col, row) to CRS units.
    height, width : pixels.
    planes : 3 for colour, 1 for grey or heights.
    eight_bit : values are 0..255; else they are float32.
    stretch : (low, high) raw values brought to 0 and 1; None where they are taken as they are.
    image_date : ISO date, or "" where the file does not say.
    pixel_m : the longer side of a pixel in ground metres, once the tile is in a mosaic.
    faults : sentences on places that could not be read; shared by all tiles of a mosaic.
    """

    name: str
    crs: CRS
    transform: Affine
    height: int
    width: int
    planes: int
    eight_bit: bool
    path: Path | None = None
    stretch: tuple[float, float] | None = None
    image_date: str = ""
    pixel_m: float = float("nan")
    faults: list[str] = field(default_factory=list, repr=False)

    @abstractmethod
    def raw(self, row: int, col: int, rows: int, cols: int) -> Pixels:
        """Read values as they are stored; the window lies inside the tile."""

    def read(self, row: int, col: int, rows: int, cols: int) -> Pixels:
        """Read uint8 values, or float32 values after the stretch; the window lies inside the tile."""
        values, valid = self.raw(row, col, rows, cols)
        if self.eight_bit:
            return values, valid
        shares: NDArray[np.float32] = values.astype(np.float32)
        if self.stretch is not None:
            low, high = self.stretch
            shares = np.clip((shares - np.float32(low)) / np.float32(high - low), 0, 1)
        return shares, valid

    @cached_property
    def lattice(self) -> tuple[Lattice, int, int]:
        """The tile's lattice and the lattice (row, col) of its first pixel."""
        return Lattice.of(self.transform)

    @cached_property
    def bounds(self) -> tuple[float, float, float, float]:
        """Least and greatest x and y (minx, miny, maxx, maxy) in CRS units."""
        lattice, row, col = self.lattice
        corners = lattice.corners(row, col, self.height, self.width)
        (minx, miny), (maxx, maxy) = corners.min(axis=0), corners.max(axis=0)
        return float(minx), float(miny), float(maxx), float(maxy)

    def settle(self) -> None:
        """Fix the stretch from the tile's own values.

        Raises
        ------
        BadInput
            If no pixel of the tile holds data.
        """
        if not self._any_valid():
            raise BadInput(f"{self.name} holds no data at all; leave it out.")
        if self.eight_bit:
            return
        sampled = self._sample()
        low, high = np.percentile(sampled, STRETCH_PERCENT) if sampled.size else (0.0, 1.0)
        self.stretch = (float(low), float(high) if high > low else float(low) + 1.0)

    def _sample(self) -> NDArray[np.float32]:
        """Valid values from places that depend on the tile's size alone."""
        found: list[NDArray[np.float32]] = []
        for row, rows in _windows(self.height):
            for col, cols in _windows(self.width):
                values, valid = self.raw(row, col, rows, cols)
                kept = values if valid is None else values[:, valid]
                found.append(kept.astype(np.float32).ravel())
        return np.concatenate(found)

    def _any_valid(self) -> bool:
        side = SAMPLE_WINDOW
        middle = (max(0, (self.height - side) // 2), max(0, (self.width - side) // 2), side, side)
        rest = product(range(0, self.height, SAMPLE_PIXELS), range(0, self.width, SAMPLE_PIXELS))
        for row, col, rows, cols in chain([middle], ((*start, SAMPLE_PIXELS, SAMPLE_PIXELS) for start in rest)):
            valid = self.raw(row, col, min(rows, self.height - row), min(cols, self.width - col))[1]
            if valid is None or valid.any():
                return True
        return False


def _windows(length: int) -> list[tuple[int, int]]:
    if length <= SAMPLE_PIXELS:
        return [(0, length)]
    starts = np.linspace(0, length - SAMPLE_WINDOW, SAMPLE_WINDOWS).astype(int)
    return [(int(start), SAMPLE_WINDOW) for start in starts]


@dataclass(kw_only=True, eq=False)
class ArrayTile(Tile):
    """A tile held in memory.

    Attributes
    ----------
    array : (planes, height, width) of any real type.
    valid : (height, width), or None where every pixel is.
    """

    array: NDArray[np.generic] = field(repr=False)
    valid: NDArray[np.bool_] | None = field(default=None, repr=False)

    @classmethod
    def of(
        cls,
        array: ArrayLike,
        transform: Affine,
        crs: CRS | str,
        *,
        name: str = "array",
        nodata: float | None = None,
        image_date: str = "",
    ) -> ArrayTile:
        """Return a tile of an array (h, w), (bands, h, w) or (h, w, 3 or 4); a fourth band is left out."""
        bands = _bands_first(np.asarray(array))
        if bands.shape[0] not in (1, 3):
            raise BadInput(f"{name} has {bands.shape[0]} bands; give one (grey) or at least three (colour).")
        return cls(
            name=name, crs=CRS.from_user_input(crs), transform=transform, height=bands.shape[1],
            width=bands.shape[2], planes=bands.shape[0], eight_bit=bands.dtype == np.uint8, array=bands,
            valid=valid_where(bands, nodata), image_date=image_date,
        )  # fmt: skip

    @classmethod
    def of_heights(
        cls,
        array: ArrayLike,
        transform: Affine,
        crs: CRS | str,
        *,
        name: str = "heights",
        nodata: float | None = None,
    ) -> ArrayTile:
        """Return a raster of heights (h, w) in metres."""
        return cls.of(np.asarray(array, dtype=np.float32), transform, crs, name=name, nodata=nodata)

    def raw(self, row: int, col: int, rows: int, cols: int) -> Pixels:
        """Cut a window out of the array."""
        window = np.s_[row : row + rows, col : col + cols]
        return self.array[(slice(None), *window)], None if self.valid is None else self.valid[window]


def _bands_first(array: NDArray[np.generic]) -> NDArray[np.generic]:
    if array.ndim == 2:
        return array[None]
    if array.ndim == 3 and array.shape[2] in (3, 4) and array.shape[0] not in (1, 3, 4):
        array = np.moveaxis(array, 2, 0)
    return array[:3] if array.shape[0] > 3 else array


def valid_where(values: NDArray[np.generic], nodata: float | None) -> NDArray[np.bool_] | None:
    """Tell where pixels (bands, h, w) hold data: not nodata in every band, finite in all; None where all do."""
    valid = np.ones(values.shape[1:], bool)
    if nodata is not None and not np.isnan(nodata):
        valid &= (values != nodata).any(axis=0)
    if np.issubdtype(values.dtype, np.floating):
        valid &= np.isfinite(values).all(axis=0)
    return None if valid.all() else valid
