"""Height rasters: one band of heights in metres, whatever unit they are stored in."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
from pyproj import CRS
from rasterio.io import DatasetReader

from roadhem.tiles.handles import dataset, stamp_of
from roadhem.tiles.source import RasterTile, has_mask, located, probe, real_type
from roadhem.tiles.tile import Pixels

UNITS_M = {
    "m": 1.0, "metre": 1.0, "meter": 1.0, "metres": 1.0, "meters": 1.0,
    "ft": 0.3048, "foot": 0.3048, "feet": 0.3048, "international foot": 0.3048,
    "us-ft": 1200 / 3937, "us survey foot": 1200 / 3937, "ftus": 1200 / 3937,
    "cm": 0.01, "mm": 0.001,
}  # fmt: skip
"""Names of vertical units, lower case, in metres."""


@dataclass(kw_only=True, eq=False)
class HeightTile(RasterTile):
    """A height raster: metres are values times `factor` plus `base`.

    Attributes
    ----------
    unit_stated : whether the file says what its heights are measured in; metres if not.
    """

    factor: float
    base: float
    unit_stated: bool

    def read(self, row: int, col: int, rows: int, cols: int) -> Pixels:
        """Read heights in metres, float32; the window lies inside the raster."""
        values, valid = self.raw(row, col, rows, cols)
        if valid is not None:
            values = np.where(valid, values, 0)
        return (values.astype(np.float64) * self.factor + self.base).astype(np.float32), valid


def open_height(path: Path, crs: CRS | None) -> HeightTile:
    """Open a height raster.

    Parameters
    ----------
    crs : CRS for a file that carries none.

    Raises
    ------
    BadInput
        With the sentence for the user, if it cannot be used.
    """
    stamp = stamp_of(path)
    with dataset(stamp) as source:
        real_type(source, (1,), path.name)
        place, own_crs = located(source, path.name, crs)
        stated = _unit_m(source)
        unit = stated or 1.0
        tile = HeightTile(
            name=path.name, path=path, stamp=stamp, crs=own_crs, transform=place, height=source.height,
            width=source.width, planes=1, eight_bit=False, bands=(1,), masked=has_mask(source),
            nodata=source.nodata, factor=source.scales[0] * unit, base=source.offsets[0] * unit,
            unit_stated=stated is not None,
        )  # fmt: skip
    probe(tile)
    return tile


def _unit_m(source: DatasetReader) -> float | None:
    """Length of the unit of heights: the band's, else that of the CRS's vertical part, else unknown."""
    name = (source.units[0] or "").strip().lower()
    if name in UNITS_M:
        return UNITS_M[name]
    crs = CRS.from_wkt(source.crs.to_wkt()) if source.crs else None
    if crs is not None and len(crs.axis_info) == 3:
        return float(crs.axis_info[2].unit_conversion_factor)
    return None
