"""The mosaic: all tiles of a run, and their heights, read on the working grid."""

from __future__ import annotations

import os
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from pyproj import CRS

from roadhem.errors import BadInput
from roadhem.tiles.grid import PIXEL_M, VALID, WorkingGrid
from roadhem.tiles.height import HeightTile, open_height
from roadhem.tiles.scale import metres_per_unit, point_scale, read_crs
from roadhem.tiles.sheet import Stack, pixel_boxes
from roadhem.tiles.source import open_tile
from roadhem.tiles.tile import Tile

COARSEST_M = 0.40
"""Ground pixels coarser than this, to the centimetre, are refused; coarser than COARSE_M draws a warning."""
COARSE_M = 0.25

HEIGHT_COARSE_M = 0.5
"""Height cells coarser than this do not show a curb."""

PathLike = str | os.PathLike[str]


@dataclass(frozen=True)
class Patch:
    """A window of the working grid.

    Attributes
    ----------
    colour : (3, H, W) float32 in 0..1, 0 where there is no data.
    cover : (H, W) uint8: 0 outside the tiles, 1 no data, 2 valid.
    height : (H, W) float32 metres, NaN where there is none; None for a run without heights.
    """

    colour: NDArray[np.float32]
    cover: NDArray[np.uint8]
    height: NDArray[np.float32] | None


class Mosaic:
    """Tiles and heights on one working grid. Every pixel is the same for any window, order and number of threads.

    Attributes
    ----------
    crs : the tiles' horizontal CRS.
    grid : the working grid.
    tiles : the usable tiles, in the order in which they win where they overlap.
    faults : a sentence for each tile that cannot be used; one that fails later is added when it does.
    warnings : sentences on what to mind.
    """

    def __init__(
        self, tiles: Sequence[Tile], height: Sequence[Tile] = (), *, faults: list[str], warnings: list[str]
    ) -> None:
        self.crs = tiles[0].crs
        self.faults, self.warnings = faults, warnings
        boxes = np.array([tile.bounds for tile in tiles])
        middle = (boxes[:, :2].min(axis=0) + boxes[:, 2:].max(axis=0)) / 2
        self.grid = WorkingGrid.for_scale(metres_per_unit(self.crs), point_scale(self.crs, *middle))
        self._colour = Stack(tiles, self.grid, smooth=False)
        self._height = Stack(height, self.grid, smooth=True) if height else None
        self.tiles = self._colour.tiles
        self._boxes = np.array([tile.bounds for tile in self.tiles])
        self._pixels = pixel_boxes(self.tiles, self.grid)

    @classmethod
    def open(
        cls, tiles: Sequence[PathLike], height: Sequence[PathLike] = (), crs: str | None = None
    ) -> Mosaic:
        """Open rasters.

        Parameters
        ----------
        tiles, height : files that GDAL reads; the order does not matter.
        crs : CRS of files that carry none.

        Raises
        ------
        BadInput
            If no tile can be used, or a height raster cannot.
        """
        given = read_crs(crs) if crs else None
        paths = sorted({Path(path) for path in tiles})
        return cls.of([_opener(path, given) for path in paths], [open_height(Path(p), given) for p in height])

    @classmethod
    def of(cls, tiles: Sequence[Tile | Callable[[], Tile]], height: Sequence[Tile] = ()) -> Mosaic:
        """Make a mosaic of tiles, or of functions that open them; what cannot be used becomes a fault."""
        usable: list[Tile] = []
        faults: list[str] = []
        warnings: list[str] = []
        for item in tiles:
            try:
                tile = item() if callable(item) else item
                _check(tile, usable, warnings)
                usable.append(tile)
            except BadInput as fault:
                faults.append(str(fault))
        if not usable:
            raise BadInput(_none_usable(faults))
        for raster in height:
            _check_height(raster, usable, warnings)
        for tile in usable:
            tile.faults = faults
        return cls(usable, height, faults=faults, warnings=warnings)

    @property
    def bounds_m(self) -> tuple[float, float, float, float]:
        """Least and greatest x and y (minx, miny, maxx, maxy) of all tiles in grid metres."""
        low, high = self._boxes[:, :2].min(axis=0), self._boxes[:, 2:].max(axis=0)
        minx, miny, maxx, maxy = self.grid.to_metres([*low, *high])
        return float(minx), float(miny), float(maxx), float(maxy)

    @property
    def has_height(self) -> bool:
        """Whether the run has height rasters."""
        return self._height is not None

    def has_data(self, row: int, col: int, rows: int, cols: int) -> bool:
        """Tell whether a tile's box touches a window of working pixels."""
        top, bottom, left, right = self._pixels.T
        return bool(((top < row + rows) & (bottom > row) & (left < col + cols) & (right > col)).any())

    def read(self, row: int, col: int, rows: int, cols: int) -> Patch:
        """Read working pixels [row, row + rows) x [col, col + cols), which may lie anywhere."""
        colour, cover = self.read_colour(row, col, rows, cols)
        return Patch(colour, cover, self.read_height(row, col, rows, cols))

    def read_colour(
        self, row: int, col: int, rows: int, cols: int
    ) -> tuple[NDArray[np.float32], NDArray[np.uint8]]:
        """Read colour (3, rows, cols) and cover (rows, cols) as in `Patch`."""
        colour, cover = self._colour.sample(row, col, rows, cols, 3)
        np.clip(colour, 0, 1, out=colour)
        return colour, cover

    def read_height(self, row: int, col: int, rows: int, cols: int) -> NDArray[np.float32] | None:
        """Read heights (rows, cols) in metres, NaN where there is none; None for a run without heights."""
        if self._height is None:
            return None
        height, cover = self._height.sample(row, col, rows, cols, 1)
        height[0, cover != VALID] = np.nan
        return height[0]

    def source_at(self, x_m: float, y_m: float) -> str:
        """Name of the tile that the pixel at grid metres (x_m, y_m) comes from; "" outside all tiles."""
        row, col = int(np.floor(-y_m / PIXEL_M)), int(np.floor(x_m / PIXEL_M))
        x, y = self.grid.to_crs([x_m, y_m])
        minx, miny, maxx, maxy = self._boxes.T
        inside = np.flatnonzero((minx <= x) & (x <= maxx) & (miny <= y) & (y <= maxy))
        if len(inside) == 1:
            return self.tiles[inside[0]].name
        for index in inside:
            if Stack([self.tiles[index]], self.grid, smooth=True).sample(row, col, 1, 1, 3)[1][0, 0] == VALID:
                return self.tiles[index].name
        return ""


def _opener(path: Path, crs: CRS | None) -> Callable[[], Tile]:
    return lambda: open_tile(path, crs)


def _ground_side(tile: Tile) -> float:
    """Longer side of a pixel in ground metres, at the tile's middle."""
    minx, miny, maxx, maxy = tile.bounds
    unit = metres_per_unit(tile.crs) / point_scale(tile.crs, (minx + maxx) / 2, (miny + maxy) / 2)
    return max(tile.lattice[0].sides) * unit


def _check(tile: Tile, usable: Sequence[Tile], warnings: list[str]) -> None:
    """Refuse a tile that does not belong; fix what depends on its own pixels."""
    if usable and not tile.crs.equals(usable[0].crs, ignore_axis_order=True):
        raise BadInput(
            f"{tile.name} is in {tile.crs.name}, {usable[0].name} in {usable[0].crs.name}; "
            f"reproject it or run it on its own."
        )
    tile.pixel_m = _ground_side(tile)
    if round(tile.pixel_m, 2) > COARSEST_M:
        raise BadInput(
            f"{tile.name} has pixels of {tile.pixel_m:.2f} m on the ground, coarser than {COARSEST_M:.2f} m; "
            f"use finer imagery."
        )
    tile.settle()
    if round(tile.pixel_m, 2) > COARSE_M:
        warnings.append(
            f"{tile.name} has pixels of {tile.pixel_m:.2f} m on the ground; "
            f"placement is poor above {COARSE_M:.2f} m."
        )


def _none_usable(faults: Sequence[str]) -> str:
    if not faults:
        return "No tile is named; name at least one raster."
    if len(faults) == 1:
        return faults[0]
    return f"None of the {len(faults)} tiles can be used; the first: {faults[0]}"


def _check_height(raster: Tile, tiles: Sequence[Tile], warnings: list[str]) -> None:
    first = tiles[0]
    if not raster.crs.equals(first.crs, ignore_axis_order=True):
        raise BadInput(f"{raster.name} is in {raster.crs.name}, the tiles in {first.crs.name}; reproject it.")
    minx, miny, maxx, maxy = raster.bounds
    boxes = np.array([tile.bounds for tile in tiles])
    meets = (boxes[:, 0] < maxx) & (boxes[:, 2] > minx) & (boxes[:, 1] < maxy) & (boxes[:, 3] > miny)
    if not meets.any():
        raise BadInput(f"{raster.name} overlaps no tile; leave it out or name the heights of this place.")
    raster.pixel_m = _ground_side(raster)
    if raster.pixel_m > HEIGHT_COARSE_M:
        warnings.append(f"{raster.name} has cells of {raster.pixel_m:.2f} m; curbs do not show in it.")
    if isinstance(raster, HeightTile) and not raster.unit_stated and metres_per_unit(raster.crs) != 1.0:
        warnings.append(f"{raster.name} does not say its unit; its heights are taken as metres.")
