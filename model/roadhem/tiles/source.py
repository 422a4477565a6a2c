"""Image files as tiles: which bands count, what is valid, where they lie; refused in a sentence where unusable."""

from __future__ import annotations

from dataclasses import dataclass, field
from itertools import pairwise
from pathlib import Path

import numpy as np
from affine import Affine
from numpy.typing import NDArray
from pyproj import CRS
from rasterio.enums import ColorInterp, MaskFlags
from rasterio.errors import RasterioError
from rasterio.io import DatasetReader
from rasterio.windows import Window

from roadhem.errors import BadInput
from roadhem.tiles.handles import Stamp, dataset, stamp_of
from roadhem.tiles.scale import horizontal
from roadhem.tiles.tile import Pixels, Tile, valid_where


@dataclass(kw_only=True, eq=False)
class RasterTile(Tile):
    """A tile in a file.

    Attributes
    ----------
    bands : 1-based bands read as values.
    alpha : 1-based band that says what is valid, or None.
    masked : whether a mask beside the bands says what is valid.
    nodata : value that means no data where all `bands` have it, or None.
    palette : (256, 4) colours of a paletted band, or None.
    """

    stamp: Stamp
    bands: tuple[int, ...]
    alpha: int | None = None
    masked: bool = False
    nodata: float | None = None
    palette: NDArray[np.uint8] | None = field(default=None, repr=False)

    def raw(self, row: int, col: int, rows: int, cols: int) -> Pixels:
        """Read a window; blocks of the file that cannot be read are a fault and hold no data."""
        with dataset(self.stamp) as source:
            try:
                return self._read(source, Window(col, row, cols, rows))
            except (RasterioError, OSError):
                return self._salvage(source, row, col, rows, cols)

    def _salvage(self, source: DatasetReader, row: int, col: int, rows: int, cols: int) -> Pixels:
        """Read a window block by block, so that which pixels are lost does not depend on the window."""
        values = np.zeros((self.planes, rows, cols), np.uint8 if self.eight_bit else np.float32)
        valid = np.zeros((rows, cols), bool)
        high, wide = source.block_shapes[0]
        for first, last in _cuts(row, rows, high):
            for start, end in _cuts(col, cols, wide):
                part = np.s_[first - row : last - row, start - col : end - col]
                try:
                    found, known = self._read(source, Window(start, first, end - start, last - first))
                except (RasterioError, OSError):
                    self._note()
                else:
                    values[(slice(None), *part)] = found
                    valid[part] = True if known is None else known
        return values, valid

    def _note(self) -> None:
        fault = f"{self.name} cannot be read in places; copy or export it again."
        if fault not in self.faults:
            self.faults.append(fault)

    def _read(self, source: DatasetReader, window: Window) -> Pixels:
        bands = self.bands if self.alpha is None else (*self.bands, self.alpha)
        values = source.read(list(bands), window=window)
        valid = np.ones(values.shape[1:], bool)
        if self.alpha is not None:
            values, valid = values[:-1], values[-1] > 0
        elif self.masked:
            valid = source.read_masks(self.bands[0], window=window) > 0
        known = valid_where(values, self.nodata)
        if known is not None:
            valid &= known
        if self.palette is not None:
            colours = self.palette[values[0]]
            values = np.moveaxis(colours[..., :3], 2, 0)
            valid &= colours[..., 3] > 0
        return values, None if valid.all() else valid


def _cuts(start: int, length: int, block: int) -> list[tuple[int, int]]:
    """Parts [first, last) of [start, start + length) that lie in one block each."""
    marks = [start, *range((start // block + 1) * block, start + length, block), start + length]
    return list(pairwise(marks))


def open_tile(path: Path, crs: CRS | None) -> RasterTile:
    """Open an image.

    Parameters
    ----------
    crs : CRS for files that carry none, or one that no register knows.

    Raises
    ------
    BadInput
        With the sentence for the user, if the file cannot be used.
    """
    stamp = stamp_of(path)
    with dataset(stamp) as source:
        place, own_crs = located(source, path.name, crs)
        bands, alpha = _bands(source, path.name)
        palette = _palette(source) if len(bands) == 1 else None
        tile = RasterTile(
            name=path.name, path=path, stamp=stamp, crs=own_crs, transform=place,
            height=source.height, width=source.width, planes=len(bands) if palette is None else 3,
            eight_bit=real_type(source, bands, path.name) == np.uint8,
            bands=bands, alpha=alpha, masked=has_mask(source), nodata=source.nodata, palette=palette,
            image_date=_image_date(source),
        )  # fmt: skip
    probe(tile)
    return tile


def located(source: DatasetReader, name: str, given: CRS | None) -> tuple[Affine, CRS]:
    """Return where a raster lies and in which horizontal CRS."""
    if source.transform.is_identity:
        cure = "warp it by its control points" if source.gcps[0] else "add its world file or export it as GeoTIFF"
        raise BadInput(f"{name} does not say where it lies; {cure}.")
    if source.transform.is_degenerate:
        raise BadInput(f"{name} has pixels of no size; export it again with its place.")
    crs = _crs(source, name, given)
    if not crs.is_projected and not crs.is_engineering:
        raise BadInput(f"{name} is in degrees ({crs.name}); reproject it to a CRS in metres or feet such as UTM.")
    return source.transform, crs


def _crs(source: DatasetReader, name: str, given: CRS | None) -> CRS:
    own = horizontal(CRS.from_wkt(source.crs.to_wkt())) if source.crs else None
    if own is None and given is None:
        raise BadInput(f"{name} carries no CRS; name it with --crs, for example --crs EPSG:25832.")
    if own is None or given is None:
        return own or given
    if own.to_authority() is not None and not own.equals(given, ignore_axis_order=True):
        raise BadInput(f"{name} is in {own.name}, not in {given.name} as --crs says; leave --crs out.")
    return given


def _bands(source: DatasetReader, name: str) -> tuple[tuple[int, ...], int | None]:
    """Bands read as values, and the alpha band."""
    roles = dict(zip(source.colorinterp, source.indexes, strict=True))
    alpha = roles.get(ColorInterp.alpha)
    colours = [roles[role] for role in (ColorInterp.red, ColorInterp.green, ColorInterp.blue) if role in roles]
    others = [index for index in source.indexes if index != alpha]
    if len(colours) == 3:
        return tuple(colours), alpha
    if len(others) not in (0, 2):
        return tuple(others[:3] if len(others) > 2 else others), alpha
    raise BadInput(f"{name} has {source.count} bands; export it with one (grey) or three (colour).")


def _palette(source: DatasetReader) -> NDArray[np.uint8] | None:
    if source.colorinterp[0] != ColorInterp.palette:
        return None
    table = np.zeros((256, 4), np.uint8)
    for value, colour in source.colormap(1).items():
        table[value] = colour
    return table


def real_type(source: DatasetReader, bands: tuple[int, ...], name: str) -> np.dtype[np.generic]:
    """Return the type of the bands' values; complex numbers are refused."""
    kind = np.result_type(*(source.dtypes[band - 1] for band in bands))
    if kind.kind not in "uif":
        raise BadInput(f"{name} holds complex numbers; export it with real ones.")
    return kind


def has_mask(source: DatasetReader) -> bool:
    """Tell whether a mask lies beside the bands."""
    flags = source.mask_flag_enums[0]
    return MaskFlags.per_dataset in flags and MaskFlags.alpha not in flags


def probe(tile: Tile) -> None:
    """Read a pixel in three places; a file that fails there is refused."""
    for share in (0.0, 0.5, 1.0):
        tile.raw(int(share * (tile.height - 1)), int(share * (tile.width - 1)), 1, 1)
    if tile.faults:
        raise BadInput(tile.faults[0])


def _image_date(source: DatasetReader) -> str:
    """Date of the image as the file's tags give it, ISO, or an empty text."""
    stamp = source.tags(ns="IMAGERY").get("ACQUISITIONDATETIME") or source.tags().get("TIFFTAG_DATETIME", "")
    date = stamp[:10].replace(":", "-")
    parts = date.split("-")
    return date if [len(part) for part in parts] == [4, 2, 2] and all(map(str.isdigit, parts)) else ""
