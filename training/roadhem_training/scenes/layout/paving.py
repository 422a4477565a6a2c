"""The carriageways as they look after years: materials, patches, seams, slabs, and what lies on them."""

from __future__ import annotations

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry import LineString, MultiPolygon, Point, Polygon
from shapely.geometry.base import BaseGeometry

from roadhem_training.scenes.layout.odds import between, chance, pick
from roadhem_training.scenes.layout.plan import Plan, Road
from roadhem_training.scenes.layout.stretches import OpenChain, Stretch
from roadhem_training.scenes.layout.surface import polygons
from roadhem_training.scenes.world import Cover, OtherLine, World

Rng = np.random.Generator

RANKS = {"track": 0, "alley": 1, "close": 2, "street": 3, "ramp": 4, "main": 5, "country": 5, "motorway": 6}
PATCH_PER_100_M, TRENCH_PER_100_M, OVERLAY_PER_100_M, STAIN_PER_100_M, MANHOLE_PER_100_M = 1.2, 0.5, 0.5, 1.5, 2.0
PATCH_TONE = 0.45
SLAB = (3.0, 6.0)
BLOWN = {"raised": 0.10, "lowered": 0.1, "flush": 0.4}  # share of stretches with soil or dust over the edge
GROWN = {"raised": 0.05, "lowered": 0.0, "flush": 0.35}  # share of stretches over which grass hangs
BLOWN_MATERIAL = {"soil": 0.35, "sand": 0.3, "gravel": 0.2, "leaves": 0.15}


def pave(rng: Rng, world: World, plan: Plan, surface: MultiPolygon) -> None:
    """Lay the carriageways, side streets first so that main roads run through, and their wear."""
    if surface.is_empty:
        return
    usual = plan.roads[0] if plan.roads else None
    material, tone = (usual.material, usual.tone) if usual else ("asphalt", 0.0)
    world.ground.append(Cover(surface, material, tone))
    for part in plan.parts:
        _lay(world, surface, part.area, part.material, part.tone, 0.0)
    for node in plan.junctions:
        roads = [plan.roads[leg.road] for leg in node.legs]
        owner = min(roads, key=_rank) if chance(rng, 0.6) else max(roads, key=_rank)
        _lay(world, surface, shapely.union_all(node.corners), owner.material, owner.tone, owner.direction)
    for road in sorted(plan.roads, key=_rank):
        _lay(world, surface, road.area, road.material, road.tone, road.direction)
    for node in plan.junctions:
        if node.round:
            main = max((plan.roads[leg.road] for leg in node.legs), key=_rank)
            _lay(world, surface, node.corners[0], main.material, main.tone, 0.0)
    for k, road in enumerate(plan.roads):
        _wear(rng, world, plan, k, road, surface)


def _rank(road: Road) -> int:
    return RANKS[road.rank]


def _lay(
    world: World, surface: MultiPolygon, area: BaseGeometry, material: str, tone: float, direction: float
) -> None:
    pieces = polygons(shapely.intersection(area, surface))
    if pieces:
        world.ground.append(Cover(MultiPolygon(pieces), material, tone, direction=direction))


def _wear(rng: Rng, world: World, plan: Plan, k: int, road: Road, surface: MultiPolygon) -> None:
    length, axis = road.axis.length, road.axis
    out: list[tuple[BaseGeometry, str, float, float]] = []

    def count(per_100_m: float) -> int:
        return int(rng.poisson(per_100_m * length / 100))

    if road.material == "asphalt":
        for _ in range(count(PATCH_PER_100_M)):
            s, d = rng.uniform(0, length - 0.5), rng.uniform(-road.half, road.half)
            s1, wide = min(length, s + rng.uniform(0.6, 7)), rng.uniform(0.5, 2.2)
            area = axis.strip(s, s1, d - wide / 2, d + wide / 2)
            out.append((area, "asphalt", float(rng.normal(0, PATCH_TONE)), 0.0))
        for _ in range(count(TRENCH_PER_100_M)):
            out.append((_trench(rng, road), "asphalt", float(rng.normal(0, PATCH_TONE)), 0.0))
        for _ in range(count(OVERLAY_PER_100_M)):
            s = rng.uniform(0, length)
            right, left = pick(rng, {(-1.0, 1.0): 0.5, (-1.0, 0.0): 0.25, (0.0, 1.0): 0.25})
            area = axis.strip(s, min(length, s + rng.uniform(8, 60)) + 0.01, right * road.half, left * road.half)
            out.append((area, "asphalt", float(rng.normal(0, PATCH_TONE)), 0.0))
    for _ in range(count(STAIN_PER_100_M)):
        x, y = axis.at(rng.uniform(0, length), rng.uniform(-road.half, road.half))
        stain = Point(x, y).buffer(rng.uniform(0.2, 1.2), quad_segs=4)
        material = pick(rng, {"asphalt": 0.7, "wet": 0.2, "soil": 0.1})
        out.append((stain, material, float(rng.normal(-0.3, 0.3)), rng.uniform(0.2, 0.8)))
    for _ in range(count(MANHOLE_PER_100_M)):
        x, y = axis.at(rng.uniform(0, length), rng.normal(0, 0.4) * road.half)
        out.append((Point(x, y).buffer(rng.uniform(0.25, 0.4), quad_segs=6), "metal", float(rng.normal(0, 0.3)), 0.0))
    shapely.prepare(surface)
    for area, material, tone, soft in out:
        if surface.intersects(area):
            inside = area if surface.contains(area) else MultiPolygon(polygons(surface.intersection(area)))
            world.ground.append(Cover(inside, material, tone, soft))
    if road.material == "concrete":
        world.others += _slab_joints(rng, road)


def _trench(rng: Rng, road: Road) -> Polygon:
    """A filled cut for a pipe, along the road or across it."""
    wide = rng.uniform(0.4, 1.2)
    s = rng.uniform(0, road.axis.length - 1.3)
    if chance(rng, 0.5):
        return road.axis.strip(s, s + wide, -road.half, rng.uniform(-0.2, 1.0) * road.half)
    d = rng.uniform(-road.half, road.half)
    return road.axis.strip(s, min(road.axis.length, s + rng.uniform(10, 60)), d - wide / 2, d + wide / 2)


def _slab_joints(rng: Rng, road: Road) -> list[OtherLine]:
    """Joints between concrete slabs, along the lanes and across them."""
    every = between(rng, SLAB)
    s = np.arange(0, road.axis.length, every)
    ends = np.stack([road.axis.at(s, -road.half), road.axis.at(s, road.half)], axis=1)
    lines = [LineString(e) for e in ends]
    lanes = max(2, round(road.width / every))
    for k in range(1, lanes):
        lines.append(LineString(road.axis.parallel(0, road.axis.length, k * road.width / lanes - road.half)))
    return [OtherLine(line, "joint") for line in lines]


def joints_seen(lines: list[OtherLine]) -> list[Cover]:
    """Thin dark strips along concrete joints, sealed with bitumen."""
    areas = [line.line.buffer(0.03, cap_style="flat") for line in lines if line.what == "joint"]
    return [Cover(MultiPolygon(areas), "asphalt", -0.6)] if areas else []


def encroach(rng: Rng, stretch: Stretch) -> list[Cover]:
    """Soil, dust or grass that has come over the edge; the true edge stays beneath."""
    kind = stretch.edging.kind
    if stretch.line.length < 3:
        return []
    out = []
    if chance(rng, BLOWN[kind]):
        soft = rng.uniform(0.2, 1.2)
        area = _ragged(rng, stretch, rng.uniform(0.1, 0.8), 0.6)
        out.append(Cover(area, pick(rng, BLOWN_MATERIAL), float(rng.normal(0, 0.3)), soft))
    if chance(rng, GROWN[kind]):
        material = stretch.edging.verge_material if "grass" in stretch.edging.verge_material else "grass"
        out.append(Cover(_ragged(rng, stretch, rng.uniform(0.03, 0.25), 0.05), material, float(rng.normal(0, 0.2))))
    return [c for c in out if not c.area.is_empty]


def _ragged(rng: Rng, stretch: Stretch, reach: float, outside: float) -> BaseGeometry:
    """A band along a stretch that comes in over the edge by an uneven depth around `reach` metres."""
    chain = OpenChain(stretch.line)
    s = np.linspace(0, chain.length, max(4, int(chain.length / 0.35)))
    points = chain.points(s)
    normal = _normals(points)
    deep = reach * np.clip(0.5 + _wander(rng, len(s)), 0.0, 2.0)
    inner, outer = points + normal * deep[:, None], points - normal * outside
    return Polygon(np.concatenate([inner, outer[::-1]])).buffer(0)


def _normals(points: NDArray[np.float64]) -> NDArray[np.float64]:
    d = np.gradient(points, axis=0)
    d /= np.maximum(np.hypot(*d.T), 1e-9)[:, None]
    return np.stack([-d[:, 1], d[:, 0]], axis=1)


def _wander(rng: Rng, n: int) -> NDArray[np.float64]:
    """A random curve of n values with a spread of about 0.5: rough and smooth together."""
    rough = rng.normal(0, 0.12, n)
    smooth = np.interp(np.arange(n), np.linspace(0, n - 1, max(2, n // 9)), rng.normal(0, 0.5, max(2, n // 9)))
    return rough + smooth
