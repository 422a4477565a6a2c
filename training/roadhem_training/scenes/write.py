"""A scene as the files a mapping contractor would hand over, with the truth beside them."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import numpy as np
import pyogrio
import pyproj
import rasterio
import shapely
from numpy.typing import NDArray
from rasterio.transform import from_origin
from shapely import affinity

from roadhem.errors import BadInput, RoadhemError
from roadhem.lines.files import check_target, whole_file
from roadhem.lines.geopackage import write_geopackage
from roadhem.lines.tables import Table
from roadhem_training.scenes.scene import Scene
from roadhem_training.scenes.sight import edge_pieces, place_seeds

EPSG = 25832
FILES = ("image.tif", "height.tif", "edges.gpkg", "seeds.gpkg")

WRITTEN_AT = "2000-01-01T00:00:00.000Z"
"""GeoPackages hold the time of their last change; a fixed one keeps the bytes the same."""

TILE = 256


def check_folder(folder: Path) -> None:
    """Refuse a folder that does not exist or takes no files.

    Raises
    ------
    BadInput : with what to do about it.
    """
    if folder.exists() and not folder.is_dir():
        raise BadInput(f"{folder} is a file: name a folder to write the scene into")
    for name in FILES:
        check_target(folder / name)


def write_scene(scene: Scene, seed: int, folder: Path, origin: tuple[float, float]) -> None:
    """Write image.tif, height.tif, edges.gpkg and seeds.gpkg, each whole or not at all.

    Parameters
    ----------
    scene : what to write; seed : its seed, which also places the clicks.
    folder : must exist; origin : easting and northing of the lower left corner, EPSG:25832.
    """
    check_folder(folder)
    crs = pyproj.CRS.from_epsg(EPSG)
    pieces = edge_pieces(scene)
    corner = (origin[0], origin[1] + scene.world.size)
    _write_raster(folder / "image.tif", np.moveaxis(scene.image, -1, 0), scene, corner, valid=scene.valid)
    _write_raster(folder / "height.tif", scene.height[None], scene, corner, nodata=float("nan"))

    edges = Table("edges", "LineString", {"kind": "text", "visible": "text", "seen": "text"})
    for piece in pieces:
        edges.add(_placed(piece.line, origin), kind=piece.kind, visible=piece.visible, seen=piece.seen)
    areas = Table("areas", "Polygon", {"name": "text"})
    areas.add(_placed(shapely.box(0, 0, scene.world.size, scene.world.size), origin), name="frame")
    seeds = Table("seeds", "Point", {"seed_id": "integer"})
    for number, point in enumerate(place_seeds(scene, pieces, seed), start=1):
        seeds.add(_placed(point, origin), seed_id=number)
    with _fixed_time():
        write_geopackage(folder / "edges.gpkg", [edges, areas], crs)
        write_geopackage(folder / "seeds.gpkg", [seeds], crs)


def _placed(shape: shapely.Geometry, origin: tuple[float, float]) -> shapely.Geometry:
    return affinity.translate(shape, *origin)


def _write_raster(
    target: Path,
    bands: NDArray[np.uint8] | NDArray[np.float32],
    scene: Scene,
    corner: tuple[float, float],
    nodata: float | None = None,
    valid: NDArray[np.bool_] | None = None,
) -> None:
    profile = {
        "driver": "GTiff", "count": len(bands), "height": bands.shape[1], "width": bands.shape[2],
        "dtype": bands.dtype, "crs": f"EPSG:{EPSG}", "transform": from_origin(*corner, scene.pixel, scene.pixel),
        "tiled": True, "blockxsize": TILE, "blockysize": TILE, "compress": "deflate", "nodata": nodata,
        "predictor": 3 if bands.dtype == np.float32 else 2, "interleave": "pixel",
    }  # fmt: skip
    try:
        with (
            whole_file(target) as part,
            rasterio.Env(GDAL_TIFF_INTERNAL_MASK=True),
            rasterio.open(part, "w", **profile) as raster,
        ):
            raster.write(bands)
            if valid is not None and not valid.all():
                raster.write_mask(valid)
    except (rasterio.errors.RasterioError, OSError) as error:
        raise RoadhemError(f"{target} could not be written, is the disk full? ({error})") from error


@contextmanager
def _fixed_time() -> Iterator[None]:
    pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": WRITTEN_AT})
    try:
        yield
    finally:
        pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": None})
