"""Unions, intersections and differences of areas that always give sound areas."""

from __future__ import annotations

from collections.abc import Callable, Iterable

import shapely
from shapely.geometry import LineString, MultiPolygon, Polygon
from shapely.geometry.base import BaseGeometry

GRID = 1e-3  # where an exact overlay finds no sound result, it is made on this grid, metres


def polygons(geometry: BaseGeometry) -> list[Polygon]:
    """The polygons in `geometry`, whatever else it holds."""
    pieces = shapely.get_parts(shapely.get_parts(geometry))
    return [p for p in pieces if isinstance(p, Polygon) and not p.is_empty]


def joined(shapes: Iterable[BaseGeometry]) -> MultiPolygon:
    """The union of areas."""
    shapes = list(shapes)
    return _sound(lambda grid, *s: shapely.union_all(s, grid_size=grid), *shapes)


def shared(a: BaseGeometry, b: BaseGeometry) -> MultiPolygon:
    """The intersection of two areas."""
    return _sound(lambda grid, x, y: shapely.intersection(x, y, grid_size=grid), a, b)


def less(a: BaseGeometry, b: BaseGeometry) -> MultiPolygon:
    """What is left of `a` without `b`."""
    return _sound(lambda grid, x, y: shapely.difference(x, y, grid_size=grid), a, b)


def inset(shape: BaseGeometry, distance: float) -> MultiPolygon:
    """`shape` made smaller by `distance` metres, its corners kept."""
    even = shapely.set_precision(shape, GRID)
    smaller = even.buffer(-distance, join_style="mitre")
    return _solid(smaller if smaller.is_valid else shapely.make_valid(even).buffer(-distance))


def _sound(operation: Callable[..., BaseGeometry], *shapes: BaseGeometry) -> MultiPolygon:
    try:
        return _solid(operation(None, *shapes))
    except shapely.errors.GEOSException:
        return _solid(operation(GRID, *(_solid(shapely.make_valid(s)) for s in shapes)))


def _solid(shape: BaseGeometry) -> MultiPolygon:
    return MultiPolygon(polygons(shape))


def clipped(lines: list[LineString], area: BaseGeometry, least: float = 0.5) -> list[list[LineString]]:
    """For each line, its pieces inside `area` that are `least` metres or longer."""
    if not lines:
        return []
    shapely.prepare(area)
    whole = shapely.contains_properly(area, lines)
    out = []
    for line, inside in zip(lines, whole, strict=True):
        pieces = [line] if inside else shapely.get_parts(shapely.intersection(line, area))
        out.append([p for p in pieces if isinstance(p, LineString) and p.length >= least])
    return out
