"""The land between the roads: its ground, what stands there, paths across it."""

from __future__ import annotations

import math

import numpy as np
import shapely
from shapely.geometry import LineString, Polygon
from shapely.geometry.base import BaseGeometry

from roadhem_training.scenes.layout import bands, blocks, trees
from roadhem_training.scenes.layout.odds import chance, pick
from roadhem_training.scenes.layout.overlay import joined, less, shared
from roadhem_training.scenes.layout.plan import Plan
from roadhem_training.scenes.layout.stretches import Stretch
from roadhem_training.scenes.layout.traffic import vehicle
from roadhem_training.scenes.world import Body, Cover, OtherLine, World

Rng = np.random.Generator

GROUND = {
    "perimeter": {"pavers": 0.2, "slabs": 0.15, "soil": 0.15, "grass": 0.2, "concrete": 0.1, "gravel": 0.1},
    "detached": {"grass": 0.5, "mown": 0.3, "dry_grass": 0.1, "soil": 0.1},
    "halls": {"concrete": 0.1, "pavers": 0.1, "gravel": 0.3, "grass": 0.28, "dry_grass": 0.22},
    "park": {"grass": 0.5, "mown": 0.4, "dry_grass": 0.1},
    "field": {"field": 0.6, "grass": 0.25, "soil": 0.15},
    "wood": {"grass": 0.3, "leaves": 0.4, "planting": 0.3},
    "square": {"pavers": 0.4, "slabs": 0.4, "setts": 0.2},
    "waste": {"soil": 0.4, "gravel": 0.25, "sand": 0.1, "dry_grass": 0.25},
}  # fmt: skip
PATHS = {
    "perimeter": 0.1, "detached": 0.35, "halls": 0.1, "park": 0.7, "field": 0.2, "wood": 0.4, "square": 0.1,
    "waste": 0.2,
}  # fmt: skip
PATCHES = {
    "perimeter": 2,
    "detached": 3,
    "halls": 3,
    "park": 2,
    "field": 1,
    "wood": 1,
    "square": 2,
    "waste": 4,
}
PATCH = {"soil": 0.25, "gravel": 0.15, "planting": 0.25, "dry_grass": 0.15, "slabs": 0.1, "sand": 0.1}
CARS_OFF_ROAD = {
    "perimeter": 0.3, "detached": 0.35, "halls": 0.6, "park": 0.02, "field": 0.01, "wood": 0.01, "square": 0.2,
    "waste": 0.4,
}  # fmt: skip
PARCEL = (8.0, 40.0)


def fill(
    rng: Rng, world: World, plan: Plan, season: trees.Season, face: Polygon, front: list[Stretch]
) -> None:
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
    stones = [bands.band(s, s.edging.stone, face) for s in front if s.edging.stone]
    plot = less(face, joined([c.area for c in walks] + stones)).buffer(-0.05)
    built = blocks.buildings(rng, use, plot, front)
    fences, lines = blocks.enclosure(rng, use, plot)
    garden = less(plot.buffer(-0.8), joined([b.footprint.buffer(0.8, quad_segs=2) for b in built]))
    _ground(rng, world, use, garden, relief)
    world.ground += walks
    world.bodies += built + fences
    world.others += lines + blocks.roof_lines(built)
    world.crowns += trees.scattered(rng, season, garden, trees.PER_HECTARE[use])
    if use in ("field", "wood"):
        _parcels(rng, world, plot, heading, relief)
    if chance(rng, CARS_OFF_ROAD[use]):
        world.bodies += _cars(rng, garden, int(rng.integers(1, 5)))


def _island(
    rng: Rng, world: World, season: trees.Season, face: Polygon, material: str, front: list[Stretch]
) -> None:
    relief = front[0].edging.height if front else 0.12
    world.ground.append(
        Cover(face, material, float(rng.normal(0, 0.3)), 0.0, relief, rng.uniform(0, math.pi))
    )
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
        area = shared(_blob(rng, x, y, rng.uniform(1, 7)), garden)
        if not area.is_empty:
            soft = rng.uniform(0.1, 1.0) if chance(rng, 0.7) else 0.0
            tone = float(rng.normal(0, 0.3))
            world.ground.append(Cover(area, pick(rng, PATCH), tone, soft, relief))
    if chance(rng, PATHS[use]):
        material = pick(rng, {"gravel": 0.3, "asphalt": 0.25, "pavers": 0.2, "slabs": 0.15, "sand": 0.1})
        for _ in range(int(rng.integers(1, 3))):
            line = _path(rng, shapely.convex_hull(garden))
            half = rng.uniform(0.4, 1.6)
            area = shared(line.buffer(half, cap_style="flat"), garden)
            world.ground.append(Cover(area, material, float(rng.normal(0, 0.3)), 0.0, relief))
            sides = shapely.get_parts([line.offset_curve(d).intersection(garden) for d in (-half, half)])
            world.others += [
                OtherLine(g, "footway") for g in sides if isinstance(g, LineString) and g.length > 2
            ]


def _path(rng: Rng, garden: BaseGeometry) -> LineString:
    """A gently bent line from border to border."""
    along = np.array([0.0, rng.uniform(0.3, 0.7)]) + rng.uniform(0, 0.3)
    a, c = shapely.get_coordinates(shapely.line_interpolate_point(garden.boundary, along, normalized=True))
    b = 0.5 * (a + c) + rng.normal(0, 0.08 * float(np.hypot(*(c - a))), 2)
    t = np.linspace(0, 1, 40)[:, None]
    return LineString((1 - t) ** 2 * a + 2 * t * (1 - t) * b + t * t * c)


def _parcels(rng: Rng, world: World, plot: BaseGeometry, heading: float, relief: float) -> None:
    """Fields side by side, each with its own crop."""
    if plot.is_empty:
        return
    x, y = shapely.get_coordinates(plot.centroid)[0]
    reach = math.hypot(plot.bounds[2] - plot.bounds[0], plot.bounds[3] - plot.bounds[1])
    u = np.array([math.cos(heading), math.sin(heading)])
    v = np.array([-u[1], u[0]])
    at = -reach
    while at < reach:
        end = at + rng.uniform(*PARCEL)
        corners = [
            [x, y] + a * u + b * v for a, b in ((-reach, at), (reach, at), (reach, end), (-reach, end))
        ]
        area = shared(Polygon(corners), plot)
        if chance(rng, 0.6) and not area.is_empty:
            crop = pick(rng, {"field": 0.5, "grass": 0.2, "dry_grass": 0.15, "soil": 0.15})
            world.ground.append(Cover(area, crop, float(rng.normal(0, 0.35)), 0.0, relief, heading))
        at = end


def _blob(rng: Rng, x: float, y: float, radius: float) -> Polygon:
    angles = np.linspace(0, 2 * math.pi, 24, endpoint=False)
    r = radius * (
        1 + sum(rng.normal(0, 0.18) * np.cos(k * angles + rng.uniform(0, 6.3)) for k in (1, 2, 3, 4))
    )
    r = np.maximum(r, 0.2 * radius)
    stretch = rng.uniform(0.5, 1.0)
    return Polygon(np.stack([x + r * np.cos(angles), y + stretch * r * np.sin(angles)], axis=1)).buffer(0)


def _cars(rng: Rng, garden: BaseGeometry, number: int) -> list[Body]:
    if garden.is_empty:
        return []
    x0, y0, x1, y1 = garden.bounds
    out: list[Body] = []
    for _ in range(3 * number):
        x, y = rng.uniform((x0, y0), (x1, y1))
        car = vehicle(rng, x, y, rng.uniform(0, 2 * math.pi), chance(rng, 0.15))
        if garden.contains(car.footprint) and not any(car.footprint.intersects(c.footprint) for c in out):
            out.append(car)
    return out[:number]
