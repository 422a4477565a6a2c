"""Writing GeoPackages: all layers to a file beside the target, which then takes its place."""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path

import numpy as np
import pyogrio
import pyproj
from numpy.typing import NDArray
from pyogrio.errors import DataLayerError, DataSourceError, FeatureError, GeometryError

from roadhem.errors import RoadhemError
from roadhem.lines.files import whole_file
from roadhem.lines.tables import Table

SUFFIX = ".gpkg"
UTC = 100
"""GDAL's number for UTC in a time zone flag; each further one is a quarter of an hour."""


def write_geopackage(target: Path, tables: Iterable[Table], crs: pyproj.CRS) -> None:
    """Write tables as the layers of one GeoPackage, whole or not at all.

    Raises
    ------
    RoadhemError : it could not be written (disk full, no permission); the old file is still there.
    """
    authority = crs.to_authority()
    named = ":".join(authority) if authority else crs.to_wkt()
    with whole_file(target) as part:
        part.unlink(missing_ok=True)
        for number, table in enumerate(tables):
            try:
                _write_layer(part, table, named, append=number > 0)
            except (DataSourceError, DataLayerError, FeatureError, GeometryError, RuntimeError) as error:
                detail = " ".join(str(error).split()).rstrip(".")
                raise RoadhemError(
                    f"{target} could not be written ({detail}); free space or name another place"
                ) from error


def _write_layer(path: Path, table: Table, crs: str, append: bool) -> None:
    names = list(table.columns)
    values, masks = zip(*(table.column(name) for name in names), strict=True)
    times = {name: _utc(len(table.rows)) for name, kind in table.columns.items() if kind == "time"}
    pyogrio.raw.write(
        str(path),
        table.wkb(),
        list(values),
        names,
        field_mask=list(masks),
        layer=table.name,
        driver="GPKG",
        geometry_type=table.geometry_type,
        crs=crs,
        append=append,
        gdal_tz_offsets=times or None,
    )


def _utc(count: int) -> NDArray[np.int32]:
    return np.full(count, UTC, dtype=np.int32)
