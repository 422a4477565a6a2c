"""Seeds: the points a person or `mark` set, each with the points its trace shall pass through."""

from __future__ import annotations

import hashlib
from collections import Counter, defaultdict
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import pyproj
import shapely
from numpy.typing import NDArray

from roadhem.errors import BadInput
from roadhem.lines.vectors import Layer, read_layer, to_crs

ROLE = "seeds"
NO_GEOMETRY = "The seed has no geometry."
LOST_VIA = "The point's via_of names no seed."


@dataclass(frozen=True)
class Seed:
    """One seed in the run's CRS.

    Attributes
    ----------
    seed_id : as the layer says, else the feature's number; a point of a multi-point gets ".1", ".2", ...
    points : (n, 2) CRS coordinates, the seed first, then its via points in order; (0, 2) when it cannot be placed.
    fault : why it cannot even be tried, or "".
    """

    seed_id: str
    points: NDArray[np.float64]
    fault: str = ""


def read_seeds(source: str, crs: pyproj.CRS, allow_ballpark: bool = False) -> list[Seed]:
    """Read a seeds layer and bring it to `crs`.

    Raises
    ------
    BadInput : as `read_layer` and `to_crs`; no features at all; geometries that are not points.
    """
    layer = read_layer(source, ROLE)
    if not len(layer.geometry):
        raise BadInput(f"{source} holds no seeds; set at least one point")
    return seeds_of(layer, to_crs(layer, crs, allow_ballpark))


def seeds_of(layer: Layer, geometry: NDArray[Any]) -> list[Seed]:
    """Group a layer's points into seeds with their via points."""
    ids = _ids(layer)
    points = [_points(shape, layer.source) for shape in geometry]
    guide_of = _texts(layer.columns.get("via_of"), len(ids))
    order = _numbers(layer.columns.get("order"), len(ids))
    vias: dict[str, list[int]] = defaultdict(list)
    for index, guided in enumerate(guide_of):
        if guided:
            vias[guided].append(index)
    seeds = []
    for index, seed_id in enumerate(ids):
        if guide_of[index]:
            continue
        guides = sorted(vias.pop(seed_id, []), key=lambda via: (order[via], via))
        seeds += _seeds_at(seed_id, points[index], [points[via] for via in guides])
    for orphans in vias.values():
        seeds += [Seed(ids[via], points[via][:1], LOST_VIA) for via in orphans]
    return _unique(seeds)


def digest(seeds: list[Seed]) -> str:
    """Return a hash of ids and coordinates, for telling whether a journal belongs to these seeds."""
    total = hashlib.sha256()
    for seed in seeds:
        total.update(seed.seed_id.encode() + b"\0" + seed.points.tobytes() + seed.fault.encode() + b"\0")
    return total.hexdigest()


def _seeds_at(seed_id: str, points: NDArray[np.float64], guides: list[NDArray[np.float64]]) -> list[Seed]:
    if not len(points):
        return [Seed(seed_id, points, NO_GEOMETRY)]
    if len(points) == 1:
        return [Seed(seed_id, np.concatenate([points, *guides]))]
    return [Seed(f"{seed_id}.{n}", point[None]) for n, point in enumerate(points, 1)]


def _points(shape: Any, source: str) -> NDArray[np.float64]:
    if shape is None or shape.is_empty:
        return np.empty((0, 2))
    if shape.geom_type not in ("Point", "MultiPoint"):
        raise BadInput(f"{source} holds a {shape.geom_type}, seeds must be points; name a point layer")
    coordinates = shapely.get_coordinates(shape)
    return coordinates[np.isfinite(coordinates).all(axis=1)]


def _ids(layer: Layer) -> list[str]:
    named = _texts(layer.columns.get("seed_id"), len(layer.fids))
    return [text or str(fid) for text, fid in zip(named, layer.fids, strict=True)]


def _texts(values: NDArray[Any] | None, count: int) -> list[str]:
    if values is None:
        return [""] * count
    return [_text(value) for value in values]


def _text(value: Any) -> str:
    if value is None or (isinstance(value, float | np.floating) and np.isnan(value)):
        return ""
    if isinstance(value, float | np.floating) and float(value).is_integer():
        return str(int(value))
    return str(value)


def _numbers(values: NDArray[Any] | None, count: int) -> list[float]:
    if values is None:
        return [0.0] * count
    try:
        return [0.0 if value is None or value != value else float(value) for value in values]
    except (TypeError, ValueError) as error:
        raise BadInput("The seeds' column 'order' must hold numbers") from error


def _unique(seeds: list[Seed]) -> list[Seed]:
    """Give a repeated id a number of its own, so that no seed shadows another."""
    count: Counter[str] = Counter()
    distinct = []
    for seed in seeds:
        count[seed.seed_id] += 1
        again = count[seed.seed_id]
        distinct.append(replace(seed, seed_id=f"{seed.seed_id}~{again}") if again > 1 else seed)
    return distinct
