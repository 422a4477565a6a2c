"""The carriageways as they look after years: materials, patches, seams, slabs, and what lies on them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry import LineString, MultiPolygon, Point, Polygon
from shapely.geometry.base import BaseGeometry

from roadhem_training.scenes.layout.odds import between, chance, pick
from roadhem_training.scenes.layout.overlay import joined, shared
from roadhem_training.scenes.layout.plan import Plan, Road
from roadhem_training.scenes.layout.stretches import OpenChain, Stretch
from roadhem_training.scenes.world import Cover, OtherLine, World

Rng = np.random.Generator

RANKS = {"track": 0, "alley": 1, "close": 2, "street": 3, "ramp": 4, "main": 5, "country": 5, "motorway": 6}
PATCH_PER_100_M, TRENCH_PER_100_M, OVERLAY_PER_100_M, STAIN_PER_100_M, MANHOLE_PER_100_M = (
    1.2,
    0.5,
    0.5,
    1.5,
    2.0,
)
PATCH_TONE = 0.45
CRACKED, CRACK_PER_100_M = 0.3, 8.0
WHEEL_TRACKS, TRAM, GAUGE = 0.3, 0.08, 1.435
SLAB = (3.0, 6.0)
BLOWN = {"raised": 0.10, "lowered": 0.1, "flush": 0.4}  # share of stretches with soil or dust over the edge
GROWN = {"raised": 0.05, "lowered": 0.0, "flush": 0.35}  # share of stretches over which grass hangs
LOOKS = {"concrete": "stone"}  # slab joints of roads are drawn one by one, so the ground has none of its own
BLOWN_MATERIAL = {"soil": 0.35, "sand": 0.3, "gravel": 0.2, "leaves": 0.15, "snow": 0.04, "wet": 0.08}


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
        _lay(world, surface, joined(node.corners), owner.material, owner.tone, owner.direction)
    for road in sorted(plan.roads, key=_rank):
        _lay(world, surface, road.area, LOOKS.get(road.material, road.material), road.tone, road.direction)
    for node in plan.junctions:
        if node.round:
            main = max((plan.roads[leg.road] for leg in node.legs), key=_rank)
            _lay(world, surface, node.corners[0], main.material, main.tone, 0.0)
    shapely.prepare(surface)
    for k, road in enumerate(plan.roads):
        _wear(rng, world, road, surface)
        if road.material == "concrete":
            world.others += _slab_joints(rng, road, plan.clear_spans(k))


def _rank(road: Road) -> int:
    return RANKS[road.rank]


def _lay(
    world: World, surface: MultiPolygon, area: BaseGeometry, material: str, tone: float, direction: float
) -> None:
    laid = shared(area, surface)
    if not laid.is_empty:
        world.ground.append(Cover(laid, material, tone, direction=direction))


def _wear(rng: Rng, world: World, road: Road, surface: MultiPolygon) -> None:
    """Repairs, stains, tracks and covers of one road."""
    found = _spots(rng, road) + _tracks(rng, road)
    if road.material == "asphalt":
        found += _repairs(rng, road) + _sealed_cracks(rng, road)
    if road.rank == "main" and chance(rng, TRAM):
        found += _tram(rng, world, road)
    for cover in found:
        if surface.contains(cover.area):
            world.ground.append(cover)
        elif surface.intersects(cover.area):
            world.ground.append(replace(cover, area=shared(surface, cover.area)))


def _count(rng: Rng, road: Road, per_100_m: float) -> range:
    return range(int(rng.poisson(per_100_m * road.axis.length / 100)))


def _repairs(rng: Rng, road: Road) -> list[Cover]:
    """Patches, filled cuts and overlays with straight seams."""
    length, axis, areas = road.axis.length, road.axis, []
    for _ in _count(rng, road, PATCH_PER_100_M):
        s, d = rng.uniform(0, length - 0.5), rng.uniform(-road.half, road.half)
        s1, wide = min(length, s + rng.uniform(0.6, 7)), rng.uniform(0.5, 2.2)
        areas.append(axis.strip(s, s1, d - wide / 2, d + wide / 2))
    areas += [_trench(rng, road) for _ in _count(rng, road, TRENCH_PER_100_M)]
    for _ in _count(rng, road, OVERLAY_PER_100_M):
        s = rng.uniform(0, length)
        right, left = pick(rng, {(-1.0, 1.0): 0.5, (-1.0, 0.0): 0.25, (0.0, 1.0): 0.25})
        s1 = min(length, s + rng.uniform(8, 60)) + 0.01
        areas.append(axis.strip(s, s1, right * road.half, left * road.half))
    return [Cover(area, "asphalt", float(rng.normal(0, PATCH_TONE))) for area in areas]


def _spots(rng: Rng, road: Road) -> list[Cover]:
    """Stains and manholes."""
    out = []
    for _ in _count(rng, road, STAIN_PER_100_M):
        x, y = road.axis.at(rng.uniform(0, road.axis.length), rng.uniform(-road.half, road.half))
        area = Point(x, y).buffer(rng.uniform(0.2, 1.2), quad_segs=4)
        material = pick(rng, {road.material: 0.7, "wet": 0.2, "soil": 0.1})
        out.append(Cover(area, material, float(rng.normal(-0.3, 0.3)), rng.uniform(0.2, 0.8)))
    for _ in _count(rng, road, MANHOLE_PER_100_M):
        x, y = road.axis.at(rng.uniform(0, road.axis.length), rng.normal(0, 0.4) * road.half)
        area = Point(x, y).buffer(rng.uniform(0.25, 0.4), quad_segs=6)
        out.append(Cover(area, "metal", float(rng.normal(0, 0.3))))
    return out


def _tracks(rng: Rng, road: Road) -> list[Cover]:
    """Polished or oily tracks of wheels in each lane."""
    if not chance(rng, WHEEL_TRACKS):
        return []
    lane, tone = road.width / road.lanes, float(rng.normal(-0.1, 0.15))
    middles = [(k + 0.5) * lane - road.half + d for k in range(road.lanes) for d in (-0.8, 0.8)]
    areas = [road.axis.strip(0, road.axis.length, d - 0.3, d + 0.3) for d in middles]
    return [Cover(joined(areas), road.material, road.tone + tone, 0.5, direction=road.direction)]


def _sealed_cracks(rng: Rng, road: Road) -> list[Cover]:
    """Cracks filled with bitumen: thin dark lines, many along the road, some across."""
    areas = []
    for _ in _count(rng, road, CRACK_PER_100_M * (1.0 if chance(rng, CRACKED) else 0.0)):
        s, d = rng.uniform(0, road.axis.length), rng.uniform(-1, 1) * road.half
        n = int(rng.integers(6, 30))
        along = chance(rng, 0.7)
        step = np.cumsum(rng.uniform(0.4, 1.0, n) if along else rng.normal(0, 0.15, n))
        side = np.cumsum(rng.normal(0, 0.12, n) if along else rng.uniform(0.2, 0.5, n))
        stations = np.clip(s + step, 0, road.axis.length)
        line = LineString(road.axis.at(stations, np.clip(d + side, -road.half, road.half)))
        areas.append(line.buffer(rng.uniform(0.02, 0.05), cap_style="flat", quad_segs=1))
    return [Cover(joined(areas), "asphalt", -0.7)] if areas else []


def _tram(rng: Rng, world: World, road: Road) -> list[Cover]:
    """Two tram tracks in the middle of a street, in setts or in the road's own surface."""
    out = []
    if chance(rng, 0.4):
        bed = road.axis.strip(0, road.axis.length, -2.9, 2.9)
        out.append(Cover(bed, pick(rng, {"setts": 0.6, "concrete": 0.4}), direction=road.direction))
    offsets = [track + rail for track in (-1.5, 1.5) for rail in (-0.5 * GAUGE, 0.5 * GAUGE)]
    rails = [road.axis.strip(0, road.axis.length, d - 0.05, d + 0.05) for d in offsets]
    world.others += [
        OtherLine(LineString(road.axis.parallel(0, road.axis.length, d)), "rail") for d in offsets
    ]
    return [*out, Cover(joined(rails), "metal", 0.2)]


def _trench(rng: Rng, road: Road) -> Polygon:
    """A filled cut for a pipe, along the road or across it."""
    wide = rng.uniform(0.4, 1.2)
    s = rng.uniform(0, road.axis.length - 1.3)
    if chance(rng, 0.5):
        return road.axis.strip(s, s + wide, -road.half, rng.uniform(-0.2, 1.0) * road.half)
    d = rng.uniform(-road.half, road.half)
    return road.axis.strip(s, min(road.axis.length, s + rng.uniform(10, 60)), d - wide / 2, d + wide / 2)


def _slab_joints(rng: Rng, road: Road, spans: list[tuple[float, float]]) -> list[OtherLine]:
    """Joints between concrete slabs, along the lanes and across them, outside junctions."""
    every, axis = between(rng, SLAB), road.axis
    lanes = max(2, round(road.width / every))
    lines = []
    for a, b in spans:
        s = np.arange(a, b, every)
        ends = np.stack([axis.at(s, np.full(len(s), d)) for d in (-road.half, road.half)], axis=1)
        lines += [LineString(e) for e in ends]
        for k in range(1, lanes):
            lines.append(LineString(axis.parallel(a, b, k * road.width / lanes - road.half)))
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
        out.append(
            Cover(_ragged(rng, stretch, rng.uniform(0.03, 0.25), 0.05), material, float(rng.normal(0, 0.2)))
        )
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
    smooth = np.interp(
        np.arange(n), np.linspace(0, n - 1, max(2, n // 9)), rng.normal(0, 0.5, max(2, n // 9))
    )
    return rough + smooth
