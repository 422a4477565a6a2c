"""Traced GeoPackages read by a second reader: sqlite3 and the tables that the standard asks for.

Source: OGC GeoPackage encoding standard 1.2 to 1.4, requirements and table names from memory.
"""

from __future__ import annotations

import sqlite3
import struct
from pathlib import Path

import numpy as np
import pyproj
import pytest
import shapely

from roadhem.lines.geopackage import write_geopackage
from roadhem.lines.records import Lineage, Recorder
from roadhem.tiles.grid import WorkingGrid
from roadhem.tracing.result import Doubt, Trace

LAYERS = {
    "edges": "LINESTRING", "stretches": "LINESTRING", "doubts": "POINT", "unplaced": "POINT", "seeds": "POINT"
}  # fmt: skip
CRS = pyproj.CRS.from_epsg(25832)
ENVELOPE_BYTES = {0: 0, 1: 32, 2: 48, 3: 48, 4: 64}


class OneTile:
    """A single tile."""

    def source_at(self, x_m: float, y_m: float) -> tuple[str, str]:
        """Name and date."""
        return "kachel ä.tif", ""


@pytest.fixture
def package(tmp_path: Path) -> sqlite3.Connection:
    """A traced GeoPackage with a row in every layer."""
    x = np.arange(0, 60, 0.4)
    points = np.stack([500_000 + x, 5_600_000 + np.sin(x / 7)], axis=1)
    marks = np.zeros(len(x), np.uint8)
    doubt = Doubt(*points[9], "fork", 0.4)
    line = Trace(points, np.full(len(x), 0.05), marks, marks, False, "end", "unsure", (doubt,))
    lineage = Lineage("drawn", "roadhem 0", "2025-06-01T08:00:00Z")
    recorder = Recorder(CRS, WorkingGrid(1.0), OneTile(), lineage)
    edge_id = recorder.add_edge(line, [("1", points[5])])
    recorder.add_seed("1", points[5], edge_id)
    recorder.add_unplaced("2", np.array([1.0, 2.0]), "nothing there")
    recorder.add_unplaced("3", None, "the seed has no geometry")
    path = tmp_path / "lines é.gpkg"
    write_geopackage(path, recorder.layers, CRS)
    return sqlite3.connect(f"file:{path}?mode=ro", uri=True)


def test_file_says_what_it_is(package: sqlite3.Connection) -> None:
    """Should carry the application id "GPKG", a user version from 10200 on, and be sound."""
    (application,) = package.execute("PRAGMA application_id").fetchone()
    (version,) = package.execute("PRAGMA user_version").fetchone()
    assert application.to_bytes(4, "big") == b"GPKG"
    assert 10200 <= version < 20000
    assert package.execute("PRAGMA integrity_check").fetchone() == ("ok",)
    assert package.execute("PRAGMA foreign_key_check").fetchall() == []


def test_contents_and_geometry_columns(package: sqlite3.Connection) -> None:
    """Should list every layer as features of the tiles' CRS, with its geometry type and without Z or M."""
    contents = package.execute("SELECT table_name, data_type, srs_id FROM gpkg_contents").fetchall()
    assert sorted(contents) == sorted((name, "features", 25832) for name in LAYERS)
    columns = "table_name, column_name, geometry_type_name, srs_id, z, m"
    geometry = package.execute(f"SELECT {columns} FROM gpkg_geometry_columns").fetchall()
    assert sorted(geometry) == sorted((name, "geom", kind, 25832, 0, 0) for name, kind in LAYERS.items())
    organization, code, definition = package.execute(
        "SELECT organization, organization_coordsys_id, definition FROM gpkg_spatial_ref_sys WHERE srs_id = 25832"
    ).fetchone()
    assert (organization.upper(), code) == ("EPSG", 25832)
    assert pyproj.CRS.from_wkt(definition).equals(CRS, ignore_axis_order=True)


def test_extents_and_spatial_index_fit_the_rows(package: sqlite3.Connection) -> None:
    """Should hold extents and an R-tree entry for each geometry, as a second reader computes them."""
    for layer in LAYERS:
        shapes = [geometry(blob) for (blob,) in package.execute(f"SELECT geom FROM {layer}") if blob is not None]
        extent = package.execute(
            "SELECT min_x, min_y, max_x, max_y FROM gpkg_contents WHERE table_name = ?", (layer,)
        ).fetchone()
        assert extent == pytest.approx(tuple(shapely.total_bounds(shapes)))
        index = package.execute(f"SELECT minx, maxx, miny, maxy FROM rtree_{layer}_geom").fetchall()
        assert len(index) == len(shapes)
        west, east, south, north = np.array(index).T
        assert (west.min(), south.min(), east.max(), north.max()) == pytest.approx(extent, abs=1.0)
        assert package.execute(
            "SELECT extension_name FROM gpkg_extensions WHERE table_name = ?", (layer,)
        ).fetchall() == [("gpkg_rtree_index",)]


def test_column_types_and_times(package: sqlite3.Connection) -> None:
    """Should declare the standard's column types and write times as ISO 8601 in UTC."""
    types = {name: kind for _, name, kind, *_ in package.execute("PRAGMA table_info(edges)")}
    assert types["geom"] == "LINESTRING"
    assert types["closed"] == "BOOLEAN"
    assert types["version"] == "MEDIUMINT"
    assert types["length_m"] == "REAL"
    assert types["edge_id"].startswith("TEXT")
    assert {types[name] for name in ("traced_at", "valid_from", "valid_to")} == {"DATETIME"}
    row = package.execute("SELECT traced_at, valid_to, reviewer, closed, source FROM edges").fetchone()
    assert row[0].removesuffix("Z").removesuffix(".000") == "2025-06-01T08:00:00"
    assert row[0].endswith("Z")
    assert row[1:] == (None, None, 0, "kachel ä.tif")


def test_stretches_and_doubts_point_to_an_edge(package: sqlite3.Connection) -> None:
    """Should leave no stretch, doubt or seed without its edge, and keep a seed without a place."""
    for layer in ("stretches", "doubts", "seeds"):
        count, orphans = package.execute(
            f"SELECT count(*), sum(edge_id NOT IN (SELECT edge_id FROM edges)) FROM {layer}"
        ).fetchone()
        assert count > 0, layer
        assert orphans == 0, layer
    assert package.execute("SELECT seed_id FROM unplaced WHERE geom IS NULL").fetchall() == [("3",)]


def geometry(blob: bytes) -> shapely.Geometry:
    """Decode a geometry by the standard's binary header: "GP", version, flags, srs id, envelope, then WKB."""
    magic, version, flags = blob[:2], blob[2], blob[3]
    assert (magic, version) == (b"GP", 0)
    order = "<" if flags & 1 else ">"
    assert struct.unpack(f"{order}i", blob[4:8]) == (25832,)
    return shapely.from_wkb(blob[8 + ENVELOPE_BYTES[(flags >> 1) & 7] :])
