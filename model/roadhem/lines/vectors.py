"""Reading vector layers: which layer is meant, in whose coordinates, and bringing them to the run's CRS."""

from __future__ import annotations

import warnings
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pyogrio
import pyproj
import shapely
from numpy.typing import NDArray
from pyogrio.errors import DataLayerError, DataSourceError
from pyproj.aoi import AreaOfInterest
from pyproj.transformer import TransformerGroup

from roadhem.errors import BadInput

POSTGIS = "PG:"


@dataclass(frozen=True)
class Layer:
    """A vector layer in memory.

    Attributes
    ----------
    name : of the layer.
    source : what the user named.
    geometry : (n,) shapely geometries; None where a feature has none.
    columns : name to (n,) values; nulls are None in text columns, NaN in numbers.
    fids : (n,) feature numbers as the file counts them.
    crs : the layer's CRS, None when it names none.
    """

    name: str
    source: str
    geometry: NDArray[Any]
    columns: dict[str, NDArray[Any]]
    fids: NDArray[np.int64]
    crs: pyproj.CRS | None


def read_layer(source: str, role: str) -> Layer:
    """Read one layer.

    Parameters
    ----------
    source : FILE, FILE:LAYER or a PostGIS connection that begins with "PG:".
    role : "seeds", "edges" or "areas": the layer of that name is taken where none is named, else the only one.

    Raises
    ------
    BadInput : no such file or layer, not a vector file, or several layers of which none is named for the role.
    """
    path, named = split_source(source)
    layer = choose_layer(source, _layers(path, source), role, named)
    try:
        meta, fids, wkb, data = pyogrio.raw.read(path, layer=layer, return_fids=True)
    except (DataSourceError, DataLayerError, ValueError, RuntimeError) as error:
        raise BadInput(f"Layer '{layer}' of {source} cannot be read ({_one_line(error)}); export it again") from error
    if wkb is None:
        raise BadInput(f"Layer '{layer}' of {source} holds no geometry; name a layer of {role}")
    crs = pyproj.CRS.from_user_input(meta["crs"]) if meta["crs"] else None
    geometry = shapely.force_2d(shapely.from_wkb(wkb, on_invalid="ignore"))
    return Layer(layer, source, geometry, dict(zip(meta["fields"], data, strict=True)), np.asarray(fids), crs)


def layers_of(source: str) -> list[str]:
    """Return the names of the layers of FILE, FILE:LAYER or a PostGIS connection; raises BadInput."""
    return _layers(split_source(source)[0], source)


def split_source(source: str) -> tuple[str, str | None]:
    """Split FILE:LAYER; an existing FILE whose own name holds a colon is taken whole, a drive letter stays."""
    if source.startswith(POSTGIS) or Path(source).exists():
        return source, None
    path, colon, layer = source.rpartition(":")
    if colon and layer and (Path(path).exists() or len(path) > 1) and not layer.startswith(("/", "\\")):
        return path, layer
    return source, None


def choose_layer(source: str, layers: list[str], role: str, named: str | None) -> str:
    """Return the layer that is meant: the one named, else the one called `role`, else the only one.

    Raises
    ------
    BadInput : none fits; the sentence lists the layers there are.
    """
    listed = ", ".join(layers)
    if named is not None:
        if named in layers:
            return named
        raise BadInput(f"{source} has no layer '{named}'; it has {listed or 'none'}")
    if role in layers:
        return role
    if len(layers) == 1:
        return layers[0]
    if not layers:
        raise BadInput(f"{source} holds no layer; name a vector file with {role}")
    raise BadInput(f"{source} has several layers and none is called '{role}'; name one as FILE:LAYER from {listed}")


def to_crs(layer: Layer, crs: pyproj.CRS, allow_ballpark: bool = False) -> NDArray[Any]:
    """Return the layer's geometries in `crs`, transformed by the best operation PROJ has.

    Raises
    ------
    BadInput : the layer names no CRS, nothing leads to `crs`, or only a ballpark operation or one whose grid is
        missing does and `allow_ballpark` is not set.
    """
    if layer.crs is None:
        raise BadInput(f"{layer.source} has no CRS; set the one its coordinates are in before using it")
    if layer.crs.equals(crs, ignore_axis_order=True) or not len(layer.geometry):
        return layer.geometry
    known = ~(shapely.is_missing(layer.geometry) | shapely.is_empty(layer.geometry))
    if not known.any():
        return layer.geometry
    bounds = shapely.total_bounds(layer.geometry[known])
    transformer = best_transformer(layer.crs, crs, bounds, layer.source, allow_ballpark)
    moved = layer.geometry.copy()
    moved[known] = shapely.transform(layer.geometry[known], transformer.transform, interleaved=False)
    if not np.isfinite(shapely.get_coordinates(moved[known])).all():
        raise BadInput(f"Some coordinates of {layer.source} lie outside where {crs.name} is defined; check its CRS")
    return moved


def best_transformer(
    source: pyproj.CRS,
    target: pyproj.CRS,
    bounds: NDArray[np.float64],
    what: str,
    allow_ballpark: bool = False,
) -> pyproj.Transformer:
    """Return PROJ's best operation between two CRSs, or refuse.

    Parameters
    ----------
    bounds : (minx, miny, maxx, maxy) in `source`, where the operation shall hold.
    what : the thing to transform, for the sentence.

    Raises
    ------
    BadInput : as `to_crs`; the sentence names the operation or the missing grid.
    """
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # a missing grid is told below
        group = TransformerGroup(
            source, target, always_xy=True, allow_ballpark=True, area_of_interest=_area(source, bounds)
        )
    pair = f"{what} from {source.name} to {target.name}"
    way_out = "bring it to the tiles' CRS yourself, or accept the shift with --allow-ballpark"
    if not group.transformers:
        raise BadInput(f"PROJ knows no way to transform {pair}; bring it to the tiles' CRS yourself")
    if not allow_ballpark and not group.best_available:
        grids = [g.short_name for op in group.unavailable_operations for g in op.grids if not g.available]
        named = f"The grid {grids[0]}" if grids else "A grid"
        raise BadInput(f"{named} that the best operation needs to transform {pair} is not installed; {way_out}")
    best = group.transformers[0]
    if not allow_ballpark and "ballpark" in best.description.lower():
        raise BadInput(f"Only a ballpark operation transforms {pair}, which may be metres off; {way_out}")
    return best


def _area(crs: pyproj.CRS, bounds: NDArray[np.float64]) -> AreaOfInterest | None:
    if crs.geodetic_crs is None:
        return None
    to_lonlat = pyproj.Transformer.from_crs(crs, crs.geodetic_crs, always_xy=True)
    west, south, east, north = to_lonlat.transform_bounds(*bounds)
    return AreaOfInterest(west, south, east, north) if np.isfinite([west, south, east, north]).all() else None


def _layers(path: str, source: str) -> list[str]:
    if not path.startswith(POSTGIS) and not Path(path).exists():
        raise BadInput(f"There is no file {path}; check the name")
    if path.startswith(POSTGIS) and "PostgreSQL" not in pyogrio.list_drivers():
        raise BadInput(f"The installed GDAL cannot read PostGIS; export {source} to a GeoPackage and name that")
    try:
        return [str(name) for name, _ in pyogrio.list_layers(path)]
    except DataSourceError as error:
        raise BadInput(f"{source} is not a vector file that can be read; name a GeoPackage or GeoJSON") from error


def _one_line(error: Exception) -> str:
    return " ".join(str(error).split()).rstrip(".")
