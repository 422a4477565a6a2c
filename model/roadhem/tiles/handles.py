"""Raster files opened once for each thread, under a bounded block cache."""

from __future__ import annotations

import os
import threading
import warnings
from collections import OrderedDict
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import rasterio
from rasterio.errors import NotGeoreferencedWarning, RasterioIOError
from rasterio.io import DatasetReader

from roadhem.errors import BadInput

CACHE_BYTES = 128 * 2**20
"""GDAL's block cache."""

OPEN_FILES = 48
"""Datasets a thread keeps open."""

JPEG_TAIL = 4096
"""Bytes at the end of a JPEG in which its end marker must stand."""

Stamp = tuple[str, int, int]
"""Path, time of change and size: a file written anew is opened anew."""


class _Handles(threading.local):
    """A thread's open datasets, the ones used last."""

    def __init__(self) -> None:
        self.open: OrderedDict[Stamp, DatasetReader] = OrderedDict()

    def get(self, stamp: Stamp) -> DatasetReader:
        dataset = self.open.pop(stamp, None) or _quiet_open(stamp[0])
        self.open[stamp] = dataset
        if len(self.open) > OPEN_FILES:
            self.open.popitem(last=False)[1].close()
        return dataset


def _quiet_open(path: str) -> DatasetReader:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", NotGeoreferencedWarning)
        return rasterio.open(path)


_handles = _Handles()


@contextmanager
def dataset(stamp: Stamp) -> Iterator[DatasetReader]:
    """Give this thread's handle of a file; BadInput if GDAL cannot open it."""
    with rasterio.Env(GDAL_CACHEMAX=CACHE_BYTES):
        try:
            source = _handles.get(stamp)
        except RasterioIOError as error:
            name = Path(stamp[0]).name
            raise BadInput(f"{name} is no raster that can be read; copy it again or export it as GeoTIFF.") from error
        yield source


def stamp_of(path: Path) -> Stamp:
    """Open a file and return its stamp.

    Raises
    ------
    BadInput
        If it is missing, empty, cut short or no raster.
    """
    if not path.is_file():
        raise BadInput(f"There is no file {path}; check its name and folder.")
    status = path.stat()
    stamp = (str(path), status.st_mtime_ns, status.st_size)
    if status.st_size == 0:
        raise BadInput(f"{path.name} is empty; copy or export it again.")
    with dataset(stamp) as source:
        if source.count == 0:
            raise BadInput(f"{path.name} holds no image of its own; name one of the rasters inside it.")
        if (source.driver == "GTiff" and _reach(source) > status.st_size) or (
            source.driver == "JPEG" and not _ends_as_jpeg(path)
        ):
            raise BadInput(f"{path.name} is cut short; copy or export it again.")
    return stamp


def _reach(source: DatasetReader) -> int:
    """Byte at which the furthest block of a TIFF ends."""
    reach = 0
    for band in source.indexes if _band_by_band(source) else (1,):
        for (row, col), _ in source.block_windows(band):
            offset = source.get_tag_item(f"BLOCK_OFFSET_{col}_{row}", "TIFF", bidx=band)
            length = source.get_tag_item(f"BLOCK_SIZE_{col}_{row}", "TIFF", bidx=band)
            if offset and length:
                reach = max(reach, int(offset) + int(length))
    return reach


def _ends_as_jpeg(path: Path) -> bool:
    """Tell whether the marker that ends a JPEG stands at its end, padding aside; its reader does not miss it."""
    with path.open("rb") as file:
        file.seek(-min(JPEG_TAIL, path.stat().st_size), os.SEEK_END)
        return b"\xff\xd9" in file.read()


def _band_by_band(source: DatasetReader) -> bool:
    return source.tags(ns="IMAGE_STRUCTURE").get("INTERLEAVE") == "BAND"
