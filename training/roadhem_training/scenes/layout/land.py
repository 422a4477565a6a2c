"""The land between the roads: its ground, what stands there, paths across it."""

from __future__ import annotations

import math

import numpy as np
import shapely
from shapely.geometry import LineString, MultiPolygon, Polygon
from shapely.geometry.base import BaseGeometry

from roadhem_training.scenes.layout import bands, blocks, trees
from roadhem_training.scenes.layout.odds import chance, pick
from roadhem_training.scenes.layout.plan import Plan
from roadhem_training.scenes.layout.shapes import oriented_box
from roadhem_training.scenes.layout.stretches import Stretch
from roadhem_training.scenes.layout.surface import polygons
from roadhem_training.scenes.layout.traffic import vehicle
from roadhem_training.scenes.world import Body, Cover, OtherLine, World

Rng = np.random.Generator

GROUND = {
    "perimeter": {"pavers": 0.2, "slabs": 0.15, "soil": 0.15, "grass": 0.2, "concrete": 0.1, "asphalt": 0.1, "gravel": 0.1},
    "detached": {"grass": 0.5, "mown": 0.3, "dry_grass": 0.1, "soil": 0.1},
    "halls": {"concrete": 0.22, "asphalt": 0.26, "gravel": 0.2, "grass": 0.2, "dry_grass": 0.12},
    "park": {"grass": 0.5, "mown": 0.4, "dry_grass": 0.1},
    "field": {"field": 0.6, "grass": 0.25, "soil": 0.15},
    "wood": {"grass": 0.3, "leaves": 0.4, "planting": 0.3},
    "square": {"pavers": 0.35, "slabs": 0.35, "setts": 0.2, "asphalt": 0.1},
    "waste": {"soil": 0.4, "gravel": 0.25, "sand": 0.1, "dry_grass": 0.25},
}  # fmt: skip
PATHS = {"perimeter": 0.1, "detached": 0.35, "halls": 0.1, "park": 0.7, "field": 0.2, "wood": 0.4, "square": 0.1, "waste": 0.2}
PATCHES = {"perimeter": 2, "detached": 3, "halls": 3, "park": 2, "field": 1, "wood": 1, "square": 2, "waste": 4}
PATCH = {"soil": 0.25, "gravel": 0.15, "planting": 0.25, "dry_grass": 0.15, "slabs": 0.1, "sand": 0.1}
CARS_OFF_ROAD = 0.3


def fill(rng: Rng, world: World, plan: Plan, season: trees.Season, face: Polygon, front: list[Stretch]) -> None:
    """Ground, footways, houses and trees of one piece of land; `front` are the stretches of edge round it."""
    middle = face.representative_point()
    for island in plan.islands:
        if island.area.contains(middle):
            _island(rng, world, season, face, island.fill, front)
            return
    relief = float(np.median([s.edging.height for s in front])) if front else 0.0
    use = pick(rng, plan.land)
    heading = rng.uniform(0, math.pi)
    world.ground.append(Cover(face, pick(rng, GROUND[use]), float(rng.normal(0, 0.3)), 0.0, relief, heading))
    walks = bands.walks(front, face)
    taken = shapely.union_all([c.area for c in walks] + [bands.band(s, s.edging.stone, face) for s in front if s.edging.stone])
    plot = face.difference(taken).buffer(-0.05)
    built = blocks.buildings(rng, use, plot, front)
    fences, lines = blocks.enclosure(rng, use, plot)
    garden = plot.buffer(-0.8).difference(shapely.union_all([b.footprint.buffer(0.8, quad_segs=2) for b in built]))
    _ground(rng, world, use, garden, relief)
    world.ground += walks
    world.bodies += built + fences
    world.others += lines + blocks.roof_lines(built)
    world.crowns += trees.scattered(rng, season, garden, trees.PER_HECTARE[use])
    if chance(rng, CARS_OFF_ROAD):
        world.bodies += _cars(rng, garden, int(rng.integers(1, 5)))


def _island(
    rng: Rng, world: World, season: trees.Season, face: Polygon, material: str, front: list[Stretch]
) -> None:
    relief = front[0].edging.height if front else 0.12
    world.ground.append(Cover(face, material, float(rng.normal(0, 0.3)), 0.0, relief, rng.uniform(0, math.pi)))
    world.ground += bands.walks(front, face)
    inner = face.buffer(-0.4)
    if not inner.is_empty and material in ("grass", "mown", "planting") and chance(rng, 0.6):
        world.crowns += trees.scattered(rng, season, inner, trees.PER_HECTARE["island"])


def _ground(rng: Rng, world: World, use: str, garden: BaseGeometry, relief: float) -> None:
    """Patches of other ground, and paths with their two borders."""
    if garden.is_empty:
        return
    x0, y0, x1, y1 = garden.bounds
    for _ in range(rng.poisson(PATCHES[use])):
        x, y = rng.uniform((x0, y0), (x1, y1))
        area = _blob(rng, x, y, rng.uniform(1, 7)).intersection(garden)
        if not area.is_empty:
            soft = rng.uniform(0.1, 1.0) if chance(rng, 0.7) else 0.0
            world.ground.append(Cover(MultiPolygon(polygons(area)), pick(rng, PATCH), float(rng.normal(0, 0.3)), soft, relief))
    if chance(rng, PATHS[use]):
        material = pick(rng, {"gravel": 0.3, "asphalt": 0.25, "pavers": 0.2, "slabs": 0.15, "sand": 0.1})
        for _ in range(int(rng.integers(1, 3))):
            line = _path(rng, garden)
            half = rng.uniform(0.4, 1.6)
            area = line.buffer(half, cap_style="flat").intersection(garden)
            world.ground.append(Cover(MultiPolygon(polygons(area)), material, float(rng.normal(0, 0.3)), 0.0, relief))
            sides = shapely.get_parts([line.offset_curve(d).intersection(garden) for d in (-half, half)])
            world.others += [OtherLine(g, "footway") for g in sides if isinstance(g, LineString) and g.length > 2]


def _path(rng: Rng, garden: BaseGeometry) -> LineString:
    x0, y0, x1, y1 = garden.bounds
    a, c = rng.uniform((x0, y0), (x1, y1)), rng.uniform((x0, y0), (x1, y1))
    b = 0.5 * (a + c) + rng.normal(0, 0.15 * math.hypot(x1 - x0, y1 - y0), 2)
    t = np.linspace(-0.5, 1.5, 50)[:, None]
    return LineString((1 - t) ** 2 * a + 2 * t * (1 - t) * b + t * t * c)


def _blob(rng: Rng, x: float, y: float, radius: float) -> Polygon:
    angles = np.linspace(0, 2 * math.pi, 24, endpoint=False)
    r = radius * (1 + sum(rng.normal(0, 0.18) * np.cos(k * angles + rng.uniform(0, 6.3)) for k in (1, 2, 3, 4)))
    r = np.maximum(r, 0.2 * radius)
    stretch = rng.uniform(0.5, 1.0)
    return Polygon(np.stack([x + r * np.cos(angles), y + stretch * r * np.sin(angles)], axis=1)).buffer(0)


def _cars(rng: Rng, garden: BaseGeometry, number: int) -> list[Body]:
    if garden.is_empty:
        return []
    x0, y0, x1, y1 = garden.bounds
    out = []
    for _ in range(3 * number):
        x, y = rng.uniform((x0, y0), (x1, y1))
        car = vehicle(rng, x, y, rng.uniform(0, 2 * math.pi), chance(rng, 0.15))
        if garden.contains(car.footprint) and not any(car.footprint.intersects(c.footprint) for c in out):
            out.append(car)
    return out[:number]


def pitch(rng: Rng, world: World, x: float, y: float, heading: float) -> None:
    """A sports ground with its lines: bright lines on even ground, and no edge of a road."""
    length, width = rng.uniform(20, 60), rng.uniform(12, 35)
    ground = pick(rng, {"mown": 0.5, "rubber": 0.3, "sand": 0.1, "asphalt": 0.1})
    world.ground.append(Cover(oriented_box(x, y, length + 4, width + 4, heading), ground, float(rng.normal(0, 0.2))))
    outline = oriented_box(x, y, length, width, heading)
    world.others.append(OtherLine(LineString(outline.exterior), "marking"))
