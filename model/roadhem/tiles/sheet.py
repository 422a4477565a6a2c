"""Sheets: tiles of one lattice as one image, and stacks of sheets of which the first valid pixel counts."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from roadhem.tiles.grid import WorkingGrid
from roadhem.tiles.lattice import Lattice
from roadhem.tiles.resample import Taps, Turn, axis_taps, separable, turned
from roadhem.tiles.tile import Tile

OUTSIDE, NO_DATA, VALID = 0, 1, 2
"""What the tiles hold at a pixel."""

READ_PIXELS = 24_000_000
"""Source pixels held at once; larger windows are sampled in halves."""

Sampled = tuple[NDArray[np.float32], NDArray[np.uint8]]
"""Values (planes, rows, cols), 0 where not valid, and cover (rows, cols)."""


def canonical(tile: Tile) -> tuple[float, tuple[float, float, float, float], str, str]:
    """Order in which tiles win where they overlap: finer pixels first, then by place, then by name."""
    return tile.pixel_m, tile.bounds, tile.name, str(tile.path)


class Sheet:
    """Tiles of one lattice and one kind of pixel, read as one image."""

    def __init__(self, tiles: Sequence[Tile]) -> None:
        self.tiles = list(tiles)
        self.lattice: Lattice = tiles[0].lattice[0]
        self.planes = tiles[0].planes
        self.dtype = np.uint8 if tiles[0].eight_bit else np.float32
        self.unit = np.float32(1 / 255) if tiles[0].eight_bit else np.float32(1)
        self.bounds = np.array([tile.bounds for tile in tiles])

    def sample(self, grid: WorkingGrid, row: int, col: int, rows: int, cols: int, *, smooth: bool) -> Sampled:
        """Sample working pixels; `smooth` interpolates linearly where the lattice is coarser than the grid."""
        ratio = grid.cell**2 / (self.lattice.sides[0] * self.lattice.sides[1])
        if rows > 1 and rows * cols * ratio > READ_PIXELS:
            half = rows // 2
            upper = self.sample(grid, row, col, half, cols, smooth=smooth)
            lower = self.sample(grid, row + half, col, rows - half, cols, smooth=smooth)
            return np.concatenate([upper[0], lower[0]], axis=1), np.concatenate([upper[1], lower[1]])
        if self.lattice.straight:
            values, cover = self._straight(grid, row, col, rows, cols, smooth)
        else:
            values, cover = self._turned(grid, row, col, rows, cols)
        values *= self.unit
        return values, cover

    def _straight(self, grid: WorkingGrid, row: int, col: int, rows: int, cols: int, smooth: bool) -> Sampled:
        down, along = self._taps(grid, row, col, rows, cols, smooth)
        origin = down.span[0], along.span[0]
        values, codes = self.window(*down.span, *along.span)
        if codes is None:
            return separable(values, origin, down, along), np.full((rows, cols), VALID, np.uint8)
        missing = _missing(codes)
        gentle = self._taps(grid, row, col, rows, cols, True)
        lost = separable(missing, origin, *gentle)
        kept = separable(values, origin, *gentle) / np.maximum(1 - lost[0], np.float32(0.5))
        if not smooth:
            touched = separable(missing[:1], origin, abs(down), abs(along))[0] > 0
            kept = np.where(touched, kept, separable(values, origin, down, along))
        return _covered(kept, lost)

    def _taps(
        self, grid: WorkingGrid, row: int, col: int, rows: int, cols: int, smooth: bool
    ) -> tuple[Taps, Taps]:
        lattice = self.lattice
        return (
            axis_taps(row, rows, -grid.cell, lattice.e, lattice.v, smooth=smooth),
            axis_taps(col, cols, grid.cell, lattice.a, lattice.u, smooth=smooth),
        )

    def _turned(self, grid: WorkingGrid, row: int, col: int, rows: int, cols: int) -> Sampled:
        lattice = self.lattice
        samples = max(1, int(np.ceil(grid.cell / min(lattice.sides) - 1e-6)))
        inverse = np.linalg.inv(np.array([[lattice.a, lattice.b], [lattice.d, lattice.e]]))
        turn = Turn(inverse, (lattice.u, lattice.v), grid.cell, samples)
        top, bottom, left, right = turn.span(row, col, rows, cols)
        values, codes = self.window(top, bottom, left, right)
        if codes is None:
            codes = np.full(values.shape[1:], VALID, np.uint8)
        sums, lost = turned(values, _missing(codes), (top, left), turn, (row, col, rows, cols))
        return _covered(sums / np.maximum(1 - lost[0], np.float32(0.5)), lost)

    def window(
        self, top: int, bottom: int, left: int, right: int
    ) -> tuple[NDArray[np.generic], NDArray[np.uint8] | None]:
        """Read lattice rows [top, bottom) and columns [left, right): values and cover, None where all is valid."""
        rows, cols = bottom - top, right - left
        values = np.zeros((self.planes, rows, cols), self.dtype)
        codes = np.zeros((rows, cols), np.uint8)
        for tile in self.tiles:
            _, row, col = tile.lattice
            first, last = max(top, row), min(bottom, row + tile.height)
            start, end = max(left, col), min(right, col + tile.width)
            if first >= last or start >= end:
                continue
            pixels, valid = tile.read(first - row, start - col, last - first, end - start)
            if valid is None and pixels.shape == values.shape:
                return (pixels, None) if not codes.any() else (_under(pixels, values, codes), None)
            place = np.s_[first - top : last - top, start - left : end - left]
            code = codes[place]
            fresh = code != VALID if valid is None else valid & (code != VALID)
            np.copyto(values[(slice(None), *place)], pixels, where=fresh)
            codes[place] = np.where(fresh, VALID, np.maximum(code, NO_DATA))
        return values, None if codes.min() == VALID else codes


def _missing(codes: NDArray[np.uint8]) -> NDArray[np.uint8]:
    """Flags (2, h, w): not valid, outside."""
    return np.stack([codes != VALID, codes == OUTSIDE]).astype(np.uint8)


def _under(
    below: NDArray[np.generic], above: NDArray[np.generic], codes: NDArray[np.uint8]
) -> NDArray[np.generic]:
    return np.where(codes == VALID, above, below)


def _covered(values: NDArray[np.float32], lost: NDArray[np.float32]) -> Sampled:
    """Cover from the shares of each footprint that are not valid and that lie outside; values cleared beside it."""
    half = np.float32(0.5)
    cover = np.where(lost[0] <= half, VALID, np.where(lost[1] > half, OUTSIDE, NO_DATA)).astype(np.uint8)
    return np.where(cover == VALID, values, np.float32(0)), cover


class Stack:
    """Sheets over one another: the first valid pixel counts, in the canonical order of the tiles."""

    def __init__(self, tiles: Sequence[Tile], *, smooth: bool) -> None:
        self.tiles = sorted(tiles, key=canonical)
        self.smooth = smooth
        groups: dict[tuple[Lattice, int, bool], list[Tile]] = {}
        for tile in self.tiles:
            groups.setdefault((tile.lattice[0], tile.planes, tile.eight_bit), []).append(tile)
        self.sheets = [Sheet(group) for group in groups.values()]

    def sample(self, grid: WorkingGrid, row: int, col: int, rows: int, cols: int, planes: int) -> Sampled:
        """Sample working pixels; a single plane is repeated to `planes`."""
        values = np.zeros((planes, rows, cols), np.float32)
        cover = np.zeros((rows, cols), np.uint8)
        for sheet in self.sheets:
            part = _overlap(sheet.bounds, grid, row, col, rows, cols)
            if part is None:
                continue
            top, left, height, width = part
            found, code = sheet.sample(grid, top, left, height, width, smooth=self.smooth)
            if found.shape == values.shape and code.min() == VALID and not cover.any():
                return found, code
            place = np.s_[top - row : top - row + height, left - col : left - col + width]
            fresh = (code == VALID) & (cover[place] != VALID)
            np.copyto(values[(slice(None), *place)], found, where=fresh)
            cover[place] = np.maximum(cover[place], code)
            if cover.min() == VALID:
                break
        return values, cover


def pixel_bounds(bounds: NDArray[np.float64], grid: WorkingGrid) -> NDArray[np.int64]:
    """Working pixels (top, bottom, left, right), half-open, that boxes (n, 4) in CRS units touch."""
    minx, miny, maxx, maxy = (bounds / grid.cell).T
    near = 1e-6
    return np.column_stack(
        [np.floor(-maxy + near), np.ceil(-miny - near), np.floor(minx + near), np.ceil(maxx - near)]
    ).astype(np.int64)


def _overlap(
    bounds: NDArray[np.float64], grid: WorkingGrid, row: int, col: int, rows: int, cols: int
) -> tuple[int, int, int, int] | None:
    """Part (row, col, rows, cols) of a window that holds all it shares with the boxes, or None."""
    boxes = pixel_bounds(bounds, grid)
    low = np.maximum(boxes[:, [0, 2]], (row, col))
    high = np.minimum(boxes[:, [1, 3]], (row + rows, col + cols))
    shared = (low < high).all(axis=1)
    if not shared.any():
        return None
    top, left = low[shared].min(axis=0)
    bottom, right = high[shared].max(axis=0)
    return int(top), int(left), int(bottom - top), int(right - left)
