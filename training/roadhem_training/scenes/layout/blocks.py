"""What stands on the land between the roads: houses and halls, walls, fences and hedges."""

from __future__ import annotations

import math

import numpy as np
import shapely
from shapely.geometry import LineString, Polygon
from shapely.geometry.base import BaseGeometry

from roadhem_training.scenes.layout.odds import between, chance, pick, pick_between
from roadhem_training.scenes.layout.overlay import inset, less, polygons, shared
from roadhem_training.scenes.layout.shapes import oriented_box
from roadhem_training.scenes.layout.stretches import OpenChain, Stretch
from roadhem_training.scenes.world import Body, OtherLine

ROOFS = {"flat": 0.35, "gable": 0.45, "hip": 0.2}
FENCED = {
    "perimeter": 0.25, "detached": 0.5, "halls": 0.4, "park": 0.3, "field": 0.15, "wood": 0.1, "square": 0.1,
    "waste": 0.3,
}  # fmt: skip
THICKNESS = {"wall": 0.25, "fence": 0.08, "hedge": 0.8}
PERIMETER_DEPTH, PERIMETER_WIDTH, PERIMETER_HEIGHT = (8.0, 13.0), (6.0, 16.0), (6.0, 19.0)
SETBACK = {(0.2, 2.5): 0.2, (2.5, 8.0): 0.8}
LOWEST_ROOF_LINE = 3.0  # metres; outlines of roofs are drawn as lines that mislead


def buildings(rng: np.random.Generator, use: str, plot: BaseGeometry, front: list[Stretch]) -> list[Body]:
    """Buildings of one block: `plot` is the land inside the footways, `front` the stretches round it."""
    builders = {"perimeter": _perimeter, "detached": _detached, "halls": _halls}
    if use not in builders:
        return []
    return [b for piece in polygons(plot) if piece.area > 60 for b in builders[use](rng, piece, front)]


def roof_lines(bodies: list[Body]) -> list[OtherLine]:
    """The outlines of buildings."""
    return [OtherLine(LineString(b.footprint.exterior), "roof") for b in bodies if b.top >= LOWEST_ROOF_LINE]


def _perimeter(rng: np.random.Generator, plot: Polygon, front: list[Stretch]) -> list[Body]:
    """Houses wall to wall along the street, a court behind."""
    depth = between(rng, PERIMETER_DEPTH)
    out: list[Body] = []
    for piece in inset(plot, rng.uniform(0.05, 1.0)).geoms:
        ring = less(piece, inset(piece, depth))
        chain = OpenChain(LineString(piece.simplify(0.05).exterior))
        at = 0.0
        while at < chain.length - 2:
            end = min(at + between(rng, PERIMETER_WIDTH), chain.length)
            strip = chain.piece(at, end).buffer(depth + 0.01, cap_style="flat", join_style="mitre")
            house = max(shared(strip, ring).geoms, key=lambda g: g.area, default=Polygon())
            ring = less(ring, strip)
            if house.area > 20 and not chance(rng, 0.08):
                d = chain.frame(0.5 * (at + end))[1]
                out.append(_house(rng, house, between(rng, PERIMETER_HEIGHT), math.atan2(d[1], d[0])))
            at = end
    return out


def _house(rng: np.random.Generator, area: Polygon, top: float, heading: float) -> Body:
    return Body(area, round(top, 2), "house", 0.0, rng.random(), pick(rng, ROOFS), heading)


def _detached(rng: np.random.Generator, plot: Polygon, front: list[Stretch]) -> list[Body]:
    """Single houses facing the street, some with a wing."""
    setback = pick_between(rng, SETBACK)
    room = plot.buffer(-1.0)
    shapely.prepare(room)
    out: list[Body] = []
    for stretch in front:
        chain = OpenChain(stretch.line)
        back = stretch.edging.depth + setback
        at = rng.uniform(3, 8)
        while at < chain.length:
            wide, deep = rng.uniform(8, 16), rng.uniform(8, 13)
            (x, y), d = chain.frame(at)
            heading = math.atan2(d[1], d[0])
            out_by = back + 0.5 * deep + rng.normal(0, 0.5)
            area = oriented_box(x + d[1] * out_by, y - d[0] * out_by, wide, deep, heading)
            if chance(rng, 0.35):
                near = out_by - 2
                wing = oriented_box(x + d[1] * near, y - d[0] * near, wide * 0.5, deep + 2.5, heading)
                area = shapely.union(area, wing)
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
    for k in range(14):
        x, y = rng.uniform((x0, y0), (x1, y1))
        shrink = 1.0 - 0.05 * k
        area = oriented_box(x, y, rng.uniform(15, 60) * shrink, rng.uniform(10, 30) * shrink, heading)
        if room.contains(area) and not any(area.distance(b.footprint) < 5 for b in out):
            out.append(Body(area, rng.uniform(4, 14), "hall", 0.0, rng.random(), "flat", heading))
    return out


def enclosure(rng: np.random.Generator, use: str, plot: BaseGeometry) -> tuple[list[Body], list[OtherLine]]:
    """A wall, fence or hedge along the inside of the footway, with gaps."""
    bodies: list[Body] = []
    lines: list[OtherLine] = []
    if not chance(rng, FENCED[use]):
        return bodies, lines
    what = pick(rng, {"wall": 0.3, "fence": 0.35, "hedge": 0.35})
    thick, top = THICKNESS[what], between(rng, (0.8, 2.0))
    for piece in inset(plot, 0.5 * thick + 0.1).geoms:
        chain, at = OpenChain(LineString(piece.exterior)), 0.0
        while at < chain.length - 3:
            run = min(rng.uniform(6, 30), chain.length - at)
            line = chain.piece(at, at + run)
            area = line.buffer(0.5 * thick, cap_style="flat", join_style="mitre")
            bodies.append(Body(area, top, what, 0.0, rng.random()))
            lines.append(OtherLine(line, "hedge" if what == "hedge" else "wall"))
            at += run + rng.uniform(3, 7)
    return bodies, lines
