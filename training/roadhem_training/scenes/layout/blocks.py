"""What fills the land between the roads: ground, houses and halls, walls, fences and hedges."""

from __future__ import annotations

import math

import numpy as np
import shapely
from shapely.geometry import LineString, Polygon
from shapely.geometry.base import BaseGeometry

from roadhem_training.scenes.layout.odds import between, chance, pick
from roadhem_training.scenes.layout.shapes import oriented_box
from roadhem_training.scenes.layout.stretches import OpenChain, Stretch
from roadhem_training.scenes.layout.surface import polygons
from roadhem_training.scenes.world import Body, OtherLine

LAND = {
    "old_town": {"pavers": 0.35, "soil": 0.15, "grass": 0.25, "concrete": 0.15, "gravel": 0.1},
    "suburb": {"grass": 0.8, "soil": 0.1, "planting": 0.1},
    "industry": {"concrete": 0.25, "asphalt": 0.25, "gravel": 0.2, "grass": 0.3},
}
ROOFS = {"flat": 0.35, "gable": 0.45, "hip": 0.2}
BUILT = {"old_town": 0.9, "suburb": 0.85, "industry": 0.8}
FENCED = {"old_town": 0.25, "suburb": 0.5, "industry": 0.4}


def houses(rng: np.random.Generator, style: str, plot: BaseGeometry, front: list[Stretch]) -> list[Body]:
    """Buildings of one block: `plot` is the land inside the footways, `front` the stretches round it."""
    if not chance(rng, BUILT[style]):
        return []
    build = {"old_town": _perimeter, "suburb": _detached, "industry": _halls}[style]
    return [b for piece in polygons(plot) if piece.area > 60 for b in build(rng, piece, front)]


def _perimeter(rng: np.random.Generator, plot: Polygon, front: list[Stretch]) -> list[Body]:
    """Houses wall to wall along the street, a court behind."""
    depth = rng.uniform(8, 13)
    land = plot.buffer(-rng.uniform(0.05, 1.0), join_style="mitre")
    out: list[Body] = []
    for piece in polygons(land):
        ring = piece.difference(piece.buffer(-depth, join_style="mitre"))
        chain = OpenChain(LineString(piece.exterior))
        taken: list[BaseGeometry] = []
        at = 0.0
        while at < chain.length - 2:
            wide = rng.uniform(6, 16)
            strip = chain.piece(at, min(at + wide, chain.length)).buffer(depth + 0.01, cap_style="flat")
            at += wide
            if chance(rng, 0.08):
                continue
            area = strip.intersection(ring).difference(shapely.union_all(taken))
            house = max(polygons(area), key=lambda g: g.area, default=Polygon())
            taken.append(strip)
            if house.area > 20:
                heading = chain.frame(min(at, chain.length))[1]
                out.append(_house(rng, house, rng.uniform(6, 19), math.atan2(heading[1], heading[0])))
    return out


def _house(rng: np.random.Generator, area: Polygon, top: float, heading: float) -> Body:
    return Body(area, round(top, 2), "house", 0.0, rng.random(), pick(rng, ROOFS), heading)


def _detached(rng: np.random.Generator, plot: Polygon, front: list[Stretch]) -> list[Body]:
    """Single houses with a garage now and then, facing the street."""
    setback = rng.uniform(2.5, 8)
    room = plot.buffer(-1.0)
    out: list[Body] = []
    for stretch in front:
        chain = OpenChain(stretch.line)
        back = stretch.edging.stone + stretch.edging.verge + stretch.edging.footway + setback
        at = rng.uniform(3, 8)
        while at < chain.length:
            wide, deep = rng.uniform(8, 16), rng.uniform(8, 13)
            (x, y), d = chain.frame(at)
            heading = math.atan2(d[1], d[0])
            out_by = back + 0.5 * deep + rng.normal(0, 0.5)
            area = oriented_box(x + d[1] * out_by, y - d[0] * out_by, wide, deep, heading)
            if room.contains(area) and not any(area.distance(b.footprint) < 2.5 for b in out):
                out.append(_house(rng, area, rng.uniform(4, 9), heading))
            at += wide * 0.5 + rng.uniform(3, 8)
    return out


def _halls(rng: np.random.Generator, plot: Polygon, front: list[Stretch]) -> list[Body]:
    """A few large flat halls, square to the longest side of the plot."""
    corners = shapely.get_coordinates(plot.minimum_rotated_rectangle)
    u = max((corners[1] - corners[0], corners[2] - corners[1]), key=lambda e: float(np.hypot(*e)))
    heading = math.atan2(u[1], u[0])
    room = plot.buffer(-rng.uniform(2, 6))
    out: list[Body] = []
    x0, y0, x1, y1 = plot.bounds
    for _ in range(12):
        x, y = rng.uniform((x0, y0), (x1, y1))
        area = oriented_box(x, y, rng.uniform(15, 60), rng.uniform(10, 30), heading)
        if room.contains(area) and not any(area.distance(b.footprint) < 5 for b in out):
            out.append(Body(area, rng.uniform(4, 14), "hall", 0.0, rng.random(), "flat", heading))
    return out


def enclosure(rng: np.random.Generator, style: str, plot: BaseGeometry) -> tuple[list[Body], list[OtherLine]]:
    """A wall, fence or hedge along the inside of the footway, with gaps."""
    bodies, lines = [], []
    if not chance(rng, FENCED[style]):
        return bodies, lines
    what = pick(rng, {"wall": 0.3, "fence": 0.35, "hedge": 0.35})
    thick = {"wall": 0.25, "fence": 0.08, "hedge": 0.8}[what]
    top = between(rng, (0.8, 2.0))
    for piece in polygons(plot.buffer(-0.5 * thick - 0.1, join_style="mitre")):
        chain, at = OpenChain(LineString(piece.exterior)), 0.0
        while at < chain.length - 3:
            run = min(rng.uniform(6, 30), chain.length - at)
            line = chain.piece(at, at + run)
            area = line.buffer(0.5 * thick, cap_style="flat", join_style="mitre")
            bodies.append(Body(area, top, what, 0.0, rng.random()))
            lines.append(OtherLine(line, what if what != "fence" else "wall"))
            at += run + rng.uniform(3, 7)
    return bodies, lines
