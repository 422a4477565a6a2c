"""Writing GeoJSON by RFC 7946: longitude and latitude on WGS 84, nine decimals (0.1 mm).

A GeoJSON file holds one layer, so NAME.geojson holds the edges and each further layer lies beside it as
NAME.LAYER.geojson.
"""

from __future__ import annotations

import json
from collections.abc import Iterable
from pathlib import Path
from typing import Any

import numpy as np
import pyproj
import shapely

from roadhem.lines.files import whole_file
from roadhem.lines.tables import Table

SUFFIXES = (".geojson", ".json")
WGS84 = pyproj.CRS.from_epsg(4326)
DECIMALS = 9


def write_geojson(target: Path, tables: Iterable[Table], to_lonlat: pyproj.Transformer) -> None:
    """Write the first table to `target` and the others beside it.

    Parameters
    ----------
    to_lonlat : from the tables' CRS to longitude and latitude, x first.
    """
    for number, table in enumerate(tables):
        path = target if number == 0 else target.with_name(f"{target.stem}.{table.name}{target.suffix}")
        content = {"type": "FeatureCollection", "features": _features(table, to_lonlat)}
        with whole_file(path) as part:
            part.write_text(json.dumps(content, ensure_ascii=False, separators=(",", ":")) + "\n", encoding="utf-8")


def _features(table: Table, to_lonlat: pyproj.Transformer) -> list[dict[str, Any]]:
    return [
        {"type": "Feature", "geometry": _geometry(shape, to_lonlat), "properties": _properties(table, row)}
        for shape, row in zip(table.geometry, table.rows, strict=True)
    ]


def _properties(table: Table, row: dict[str, Any]) -> dict[str, Any]:
    return {name: row.get(name) for name in table.columns}


def _geometry(shape: Any, to_lonlat: pyproj.Transformer) -> dict[str, Any] | None:
    if shape is None:
        return None
    lonlat = np.round(np.stack(to_lonlat.transform(*shapely.get_coordinates(shape).T), axis=1), DECIMALS)
    coordinates: Any = lonlat.tolist()
    return {"type": shape.geom_type, "coordinates": coordinates[0] if shape.geom_type == "Point" else coordinates}
