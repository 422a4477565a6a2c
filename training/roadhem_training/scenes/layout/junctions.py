"""Where roads meet: finding the junctions of a plan and shaping their corners."""

from __future__ import annotations

import math

import numpy as np
import shapely
from shapely.geometry import Polygon
from shapely.geometry.base import BaseGeometry

from roadhem_training.scenes.layout import odds
from roadhem_training.scenes.layout.alignment import quad_segments
from roadhem_training.scenes.layout.odds import between, chance, pick, pick_between
from roadhem_training.scenes.layout.overlay import joined, less
from roadhem_training.scenes.layout.plan import Edging, Island, Junction, Leg, Road
from roadhem_training.scenes.layout.shapes import oriented_box
from roadhem_training.scenes.layout.surface import GRID

END = 2.0  # a road that meets another this near its own end stops there, metres
STRAIGHT = math.radians(176)  # legs at least this far apart need no curb return
SHARPEST = math.radians(8)
LONGEST_RETURN = 38.0  # metres from the node; radii that would need more are made smaller
ROUNDABOUT = 0.08
ROUNDABOUT_ALONE = 34.0  # metres to the next junction
ROUNDABOUT_ISLAND = (2.0, 13.0)  # radius
ROUNDABOUT_LANE = (4.5, 8.0)
SLIP_LANE = 0.10  # share of corners between wide roads with a lane and an island of their own
SLIP_RADIUS, SLIP_WIDTH = (16.0, 30.0), (3.8, 5.0)


def meetings(roads: list[Road], window: Polygon) -> list[tuple[float, float]]:
    """Points in `window` where two or more axes meet, each once."""
    lines = np.array([r.axis.line for r in roads], dtype=object)
    if len(lines) < 2:
        return []
    first, second = shapely.STRtree(lines).query(lines, predicate="dwithin", distance=0.5)
    points: list[tuple[float, float]] = []
    for i, j in zip(first, second, strict=True):
        if i >= j:
            continue
        found = list(shapely.get_coordinates(shapely.intersection(lines[i], lines[j])))
        if not found:
            found = [shapely.get_coordinates(shapely.shortest_line(lines[i], lines[j]))[0]]
        for x, y in found:
            if shapely.contains_xy(window, x, y) and all(math.hypot(x - a, y - b) > 1.0 for a, b in points):
                points.append((float(x), float(y)))
    return points


def junctions(
    rng: np.random.Generator, roads: list[Road], window: Polygon, roundabouts: float = ROUNDABOUT
) -> tuple[list[Junction], list[Island]]:
    """Every meeting in `window` with its legs and rounded corners; and the islands that belong to them."""
    lines = np.array([r.axis.line for r in roads], dtype=object)
    nodes, islands = [], []
    met = meetings(roads, window)
    for x, y in met:
        near = np.flatnonzero(shapely.dwithin(lines, shapely.points(x, y), 1.0))
        legs = [leg for i in near for leg in _legs(roads[i], int(i), x, y)]
        legs.sort(key=lambda leg: leg.heading)
        if len(legs) < 3:
            continue
        _square_off(roads, legs, x, y)
        wide = max(roads[leg.road].half for leg in legs) > 3.2
        alone = all(math.hypot(x - a, y - b) > ROUNDABOUT_ALONE for a, b in met if (a, b) != (x, y))
        if wide and alone and chance(rng, roundabouts):
            node, own = _roundabout(rng, roads, x, y, legs)
        else:
            node, own = _crossing(rng, roads, x, y, legs)
        nodes.append(node)
        islands += own
    return nodes, islands


def _legs(road: Road, index: int, x: float, y: float) -> list[Leg]:
    s = road.axis.station(x, y)
    legs = []
    if s < road.axis.length - END:
        legs.append(Leg(index, s, 1, road.axis.heading(s + 0.5), 0.0))
    if s > END:
        back = road.axis.heading(s - 0.5) + math.pi
        legs.append(Leg(index, s, -1, (back + math.pi) % (2 * math.pi) - math.pi, 0.0))
    return legs


def _square_off(roads: list[Road], legs: list[Leg], x: float, y: float) -> None:
    """Keep the square ends of roads that stop here on their own side of a road that goes through."""
    count = {leg.road: sum(other.road == leg.road for other in legs) for leg in legs}
    through = next((leg for leg in legs if count[leg.road] == 2), None)
    if through is None:
        return
    for leg in legs:
        if count[leg.road] == 1:
            side = math.copysign(1.0, math.sin(leg.heading - through.heading))
            deep = roads[leg.road].half + 1.0
            away = through.heading - side * 0.5 * math.pi
            middle = x + 0.5 * deep * math.cos(away), y + 0.5 * deep * math.sin(away)
            roads[leg.road].beyond.append(oriented_box(*middle, 2 * deep, deep, through.heading))


def _arm(road: Road, leg: Leg, reach: float) -> Polygon:
    end = min(max(leg.station + leg.sign * reach, 0.0), road.axis.length)
    s0, s1 = sorted((leg.station, end))
    return road.axis.strip(s0, s1, -road.half, road.half)


def _crossing(
    rng: np.random.Generator, roads: list[Road], x: float, y: float, legs: list[Leg]
) -> tuple[Junction, list[Island]]:
    usual = pick_between(rng, odds.CORNER_RADIUS_ODDS)
    reach = [0.0] * len(legs)
    corners, radii, islands = [], [], []
    for k, leg in enumerate(legs):
        m = (k + 1) % len(legs)
        angle = (legs[m].heading - leg.heading) % (2 * math.pi)
        if angle > STRAIGHT or angle < SHARPEST:
            continue
        a, b = roads[leg.road].half, roads[legs[m].road].half
        slip = min(a, b) > 4.0 and 1.0 < angle < 2.2 and chance(rng, SLIP_LANE)
        wish = usual if chance(rng, 0.6) else pick_between(rng, odds.CORNER_RADIUS_ODDS)
        wish = between(rng, SLIP_RADIUS) if slip else wish
        bare = (b + a * math.cos(angle)) / math.sin(angle), (a + b * math.cos(angle)) / math.sin(angle)
        radius = max(0.0, min(wish, (LONGEST_RETURN - max(bare)) * math.tan(angle / 2)))
        tangent = radius / math.tan(angle / 2)
        reach[k] = max(reach[k], bare[0] + tangent)
        reach[m] = max(reach[m], bare[1] + tangent)
        radii.append(radius)
        if radius > 0.05:
            arms = [_arm(roads[g.road], g, max(bare) + tangent + 3.0) for g in (leg, legs[m])]
            middle = np.array([math.cos(leg.heading + 0.5 * angle), math.sin(leg.heading + 0.5 * angle)])
            found = closing(joined(arms), radius)
            corners += [p for p in found if (shapely.get_coordinates(p.centroid)[0] - [x, y]) @ middle > 0]
            if slip and corners:
                islands += _slip_island(rng, corners[-1], arms, roads[leg.road].left)
    legs = [Leg(g.road, g.station, g.sign, g.heading, max(r, 0.0)) for g, r in zip(legs, reach, strict=True)]
    return Junction(x, y, tuple(legs), tuple(corners), tuple(radii)), islands


def closing(shape: BaseGeometry, radius: float) -> list[Polygon]:
    """The slivers that round the inner corners of `shape` with arcs of `radius`."""
    shape = shapely.set_precision(shape, GRID)
    closed = shape.buffer(radius, join_style="mitre").buffer(-radius, quad_segs=quad_segments(radius))
    return [p for p in less(closed, shape).geoms if p.area > max(1e-3, 0.01 * radius * radius)]


def _slip_island(
    rng: np.random.Generator, corner: Polygon, arms: list[Polygon], edging: Edging
) -> list[Island]:
    """The triangle between a turning lane along the arc of `corner` and the two roads."""
    roads = joined(arms)
    arc = shapely.difference(corner.exterior, roads.buffer(0.02))
    rest = less(corner, joined([arc.buffer(between(rng, SLIP_WIDTH)), roads.buffer(0.3)]))
    nose = rng.uniform(0.3, 0.9)
    area = rest.buffer(-nose).buffer(nose, quad_segs=16)
    fill = pick(rng, odds.ISLAND_FILL)
    return [Island(p, edging.bare(), fill, "island") for p in shapely.get_parts(area) if p.area > 6.0]


def _roundabout(
    rng: np.random.Generator, roads: list[Road], x: float, y: float, legs: list[Leg]
) -> tuple[Junction, list[Island]]:
    inner = between(rng, ROUNDABOUT_ISLAND)
    outer = inner + between(rng, ROUNDABOUT_LANE)
    entry = rng.uniform(4, 14)
    disc = shapely.Point(x, y).buffer(outer, quad_segs=quad_segments(outer))
    reach = outer + entry + 3.0
    arms = joined([_arm(roads[leg.road], leg, reach + 6.0) for leg in legs])
    corners = [disc, *closing(joined([disc, arms]), entry)]
    edging = roads[legs[0].road].left
    apron = Edging(height=min(edging.height, rng.uniform(0.03, 0.12)), stone=edging.stone or 0.15,
                   stone_material=edging.stone_material, stone_tone=edging.stone_tone,
                   verge=min(rng.uniform(0.8, 2.0), 0.4 * inner) if chance(rng, 0.5) else 0.0,
                   verge_material="setts")  # fmt: skip
    middle = shapely.Point(x, y).buffer(inner, quad_segs=quad_segments(inner))
    islands = [Island(middle, apron, pick(rng, odds.ISLAND_FILL), "round")]
    for leg in legs:
        road = roads[leg.road]
        if road.width > 6.5 and not road.oneway and chance(rng, 0.7):
            islands += _splitter(rng, road, leg, outer + 0.6, outer + rng.uniform(4, 9), edging)
    legs = [Leg(g.road, g.station, g.sign, g.heading, reach) for g in legs]
    return Junction(x, y, tuple(legs), tuple(corners), (entry,), round=True), islands


def _splitter(
    rng: np.random.Generator, road: Road, leg: Leg, near: float, far: float, edging: Edging
) -> list[Island]:
    """A teardrop before a roundabout, wide towards it."""
    s0, s1 = leg.station + leg.sign * near, leg.station + leg.sign * far
    if not (0 < s0 < road.axis.length and 0 < s1 < road.axis.length):
        return []
    wide = min(road.width - 5.6, rng.uniform(1.2, 3.0))
    if wide < 0.6:
        return []
    a0, a1, b1, b0 = (road.axis.at(s, d) for s, d in ((s0, -wide / 2), (s1, -0.2), (s1, 0.2), (s0, wide / 2)))
    area = Polygon([a0, a1, b1, b0]).buffer(-0.18).buffer(0.18, quad_segs=12)
    return [Island(area, edging.bare(), pick(rng, odds.ISLAND_FILL), "island")] if area.area > 0.8 else []
