"""Sheets: tiles of one lattice as one image, and stacks of sheets of which the first valid pixel counts."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from roadhem.tiles.grid import NO_DATA, OUTSIDE, VALID, WorkingGrid
from roadhem.tiles.lattice import Lattice
from roadhem.tiles.resample import Taps, Turn, axis_taps, separable, settle, turned
from roadhem.tiles.tile import Tile

READ_PIXELS = 24_000_000
"""Source pixels held at once; larger windows are sampled in halves."""

Sampled = tuple[NDArray[np.float32], NDArray[np.uint8]]
"""Values (planes, rows, cols), 0 where not valid, and cover (rows, cols)."""


def canonical(tile: Tile) -> tuple[float, tuple[float, float, float, float], str, str]:
    """Order in which tiles win where they overlap: finer pixels first, then by place, then by name."""
    return tile.pixel_m, tile.bounds, tile.name, str(tile.path)


class Sheet:
    """Tiles of one lattice and one kind of pixel, read as one image.

    Attributes
    ----------
    smooth : interpolate linearly where the lattice is coarser than the grid, as heights need.
    boxes : (n, 4) working pixels (top, bottom, left, right) of each tile, half-open.
    """

    def __init__(self, tiles: Sequence[Tile], grid: WorkingGrid, *, smooth: bool) -> None:
        self.tiles = list(tiles)
        self.grid, self.smooth = grid, smooth
        self.lattice: Lattice = tiles[0].lattice[0]
        self.planes = tiles[0].planes
        self.dtype = np.uint8 if tiles[0].eight_bit else np.float32
        self.unit = np.float32(1 / 255) if tiles[0].eight_bit else np.float32(1)
        self.boxes = pixel_boxes(tiles, grid)
        corners = np.array([tile.lattice[1:] for tile in tiles])
        sizes = np.array([(tile.height, tile.width) for tile in tiles])
        self._low, self._high = corners, corners + sizes

    def sample(self, row: int, col: int, rows: int, cols: int) -> Sampled:
        """Sample working pixels [row, row + rows) x [col, col + cols)."""
        ratio = self.grid.cell**2 / (self.lattice.sides[0] * self.lattice.sides[1])
        if rows > 1 and rows * cols * ratio > READ_PIXELS:
            half = rows // 2
            upper, lower = self.sample(row, col, half, cols), self.sample(row + half, col, rows - half, cols)
            return np.concatenate([upper[0], lower[0]], axis=1), np.concatenate([upper[1], lower[1]])
        part = self._straight if self.lattice.straight else self._turned
        values, cover = part(row, col, rows, cols)
        if self.dtype == np.uint8:
            values *= self.unit
        return values, cover

    def _straight(self, row: int, col: int, rows: int, cols: int) -> Sampled:
        taps = self._taps(row, col, rows, cols, smooth=self.smooth)
        origin = taps[0].span[0], taps[1].span[0]
        values, codes = self.window(*taps[0].span, *taps[1].span)
        if codes is None:
            return separable(values, origin, *taps), np.full((rows, cols), VALID, np.uint8)
        missing = _missing(codes)
        gentle = taps if self.smooth else self._taps(row, col, rows, cols, smooth=True)
        lost = separable(missing, origin, *gentle)
        kept = separable(values, origin, *gentle)
        cover = settle(kept, lost)
        if not self.smooth:
            untouched = separable(missing[:1], origin, abs(taps[0]), abs(taps[1]))[0] == 0
            np.copyto(kept, separable(values, origin, *taps), where=untouched)
        return kept, cover

    def _taps(self, row: int, col: int, rows: int, cols: int, *, smooth: bool) -> tuple[Taps, Taps]:
        lattice, cell = self.lattice, self.grid.cell
        return (
            axis_taps(row, rows, -cell, lattice.e, lattice.v, smooth=smooth),
            axis_taps(col, cols, cell, lattice.a, lattice.u, smooth=smooth),
        )

    def _turned(self, row: int, col: int, rows: int, cols: int) -> Sampled:
        lattice, cell = self.lattice, self.grid.cell
        samples = max(1, int(np.ceil(cell / min(lattice.sides) - 1e-6)))
        inverse = np.linalg.inv(np.array([[lattice.a, lattice.b], [lattice.d, lattice.e]]))
        turn = Turn(inverse, (lattice.u, lattice.v), cell, samples)
        top, bottom, left, right = turn.span(row, col, rows, cols)
        values, codes = self.window(top, bottom, left, right)
        if codes is None:
            codes = np.full(values.shape[1:], VALID, np.uint8)
        sums, lost = turned(values, _missing(codes), (top, left), turn, (row, col, rows, cols))
        return sums, settle(sums, lost)

    def window(
        self, top: int, bottom: int, left: int, right: int
    ) -> tuple[NDArray[np.generic], NDArray[np.uint8] | None]:
        """Read lattice rows [top, bottom) and columns [left, right): values, and cover or None where all is valid."""
        values = np.zeros((self.planes, bottom - top, right - left), self.dtype)
        codes = np.zeros(values.shape[1:], np.uint8)
        low = np.maximum(self._low, (top, left))
        high = np.minimum(self._high, (bottom, right))
        for index in np.flatnonzero((low < high).all(axis=1)):
            tile, (first, start), (last, end) = self.tiles[index], low[index], high[index]
            row, col = self._low[index]
            pixels, valid = tile.read(int(first - row), int(start - col), int(last - first), int(end - start))
            if valid is None and pixels.shape == values.shape and not codes.any():
                return pixels, None
            place = np.s_[first - top : last - top, start - left : end - left]
            code = codes[place]
            fresh = code != VALID if valid is None else valid & (code != VALID)
            np.copyto(values[(slice(None), *place)], pixels, where=fresh)
            codes[place] = np.where(fresh, VALID, np.maximum(code, NO_DATA))
        return values, None if codes.min() == VALID else codes


def _missing(codes: NDArray[np.uint8]) -> NDArray[np.uint8]:
    """Flags (2, h, w): not valid, outside."""
    return np.stack([codes != VALID, codes == OUTSIDE]).astype(np.uint8)


class Stack:
    """Sheets over one another: the first valid pixel counts, in the canonical order of the tiles."""

    def __init__(self, tiles: Sequence[Tile], grid: WorkingGrid, *, smooth: bool) -> None:
        self.tiles = sorted(tiles, key=canonical)
        groups: dict[tuple[Lattice, int, bool], list[Tile]] = {}
        for tile in self.tiles:
            groups.setdefault((tile.lattice[0], tile.planes, tile.eight_bit), []).append(tile)
        self.sheets = [Sheet(group, grid, smooth=smooth) for group in groups.values()]

    def sample(self, row: int, col: int, rows: int, cols: int, planes: int) -> Sampled:
        """Sample working pixels; a single plane is repeated to `planes`."""
        values = np.zeros((planes, rows, cols), np.float32)
        cover = np.zeros((rows, cols), np.uint8)
        for sheet in self.sheets:
            part = _overlap(sheet.boxes, row, col, rows, cols)
            if part is None:
                continue
            top, left, height, width = part
            found, code = sheet.sample(top, left, height, width)
            if found.shape == values.shape and not cover.any():
                values, cover = found, code
            else:
                place = np.s_[top - row : top - row + height, left - col : left - col + width]
                fresh = (code == VALID) & (cover[place] != VALID)
                np.copyto(values[(slice(None), *place)], found, where=fresh)
                cover[place] = np.maximum(cover[place], code)
            if cover.min() == VALID:
                break
        return values, cover


def pixel_boxes(tiles: Sequence[Tile], grid: WorkingGrid) -> NDArray[np.int64]:
    """Working pixels (top, bottom, left, right), half-open, that each tile touches; (n, 4)."""
    minx, miny, maxx, maxy = (np.array([tile.bounds for tile in tiles]) / grid.cell).T
    near = 1e-6
    edges = np.floor(-maxy + near), np.ceil(-miny - near), np.floor(minx + near), np.ceil(maxx - near)
    return np.column_stack(edges).astype(np.int64)


def _overlap(
    boxes: NDArray[np.int64], row: int, col: int, rows: int, cols: int
) -> tuple[int, int, int, int] | None:
    """Part (row, col, rows, cols) of a window that holds all it shares with the boxes, or None."""
    low = np.maximum(boxes[:, [0, 2]], (row, col))
    high = np.minimum(boxes[:, [1, 3]], (row + rows, col + cols))
    shared = (low < high).all(axis=1)
    if not shared.any():
        return None
    top, left = low[shared].min(axis=0)
    bottom, right = high[shared].max(axis=0)
    return int(top), int(left), int(bottom - top), int(right - left)
