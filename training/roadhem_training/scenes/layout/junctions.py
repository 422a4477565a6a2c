"""Where roads meet: finding the junctions of a plan and rounding their corners."""

from __future__ import annotations

import math

import numpy as np
import shapely
from shapely.geometry import Polygon

from roadhem_training.scenes.layout import odds
from roadhem_training.scenes.layout.alignment import quad_segments
from roadhem_training.scenes.layout.odds import pick_between
from roadhem_training.scenes.layout.plan import Junction, Leg, Road

END = 2.0  # a road that meets another this near its own end stops there, metres
STRAIGHT = math.radians(176)  # legs at least this far apart need no curb return
LONGEST_RETURN = 40.0  # metres from the node; radii that would need more are made smaller


def meetings(roads: list[Road]) -> list[tuple[float, float]]:
    """Points where two or more axes meet, each once."""
    lines = np.array([r.axis.line for r in roads])
    if len(lines) < 2:
        return []
    tree = shapely.STRtree(lines)
    first, second = tree.query(lines, predicate="dwithin", distance=0.5)
    points: list[tuple[float, float]] = []
    for i, j in zip(first, second, strict=True):
        if i >= j:
            continue
        found = list(shapely.get_coordinates(shapely.intersection(lines[i], lines[j])))
        if not found:
            found = [shapely.get_coordinates(shapely.shortest_line(lines[i], lines[j]))[0]]
        for x, y in found:
            if all(math.hypot(x - a, y - b) > 1.0 for a, b in points):
                points.append((float(x), float(y)))
    return points


def junctions(rng: np.random.Generator, roads: list[Road]) -> list[Junction]:
    """Every meeting with its legs and rounded corners."""
    lines = np.array([r.axis.line for r in roads])
    out = []
    for x, y in meetings(roads):
        near = np.flatnonzero(shapely.dwithin(lines, shapely.points(x, y), 1.0))
        legs = [leg for i in near for leg in _legs(roads[i], int(i), x, y)]
        legs.sort(key=lambda leg: leg.heading)
        if len(legs) > 2:
            out.append(_junction(rng, roads, x, y, legs))
    return out


def _legs(road: Road, index: int, x: float, y: float) -> list[Leg]:
    s = road.axis.station(x, y)
    legs = []
    if s < road.axis.length - END:
        legs.append(Leg(index, s, 1, road.axis.heading(s + 0.5), 0.0))
    if s > END:
        legs.append(Leg(index, s, -1, _turn(road.axis.heading(s - 0.5) + math.pi), 0.0))
    return legs


def _turn(angle: float) -> float:
    return (angle + math.pi) % (2 * math.pi) - math.pi


def _junction(rng: np.random.Generator, roads: list[Road], x: float, y: float, legs: list[Leg]) -> Junction:
    usual = pick_between(rng, odds.CORNER_RADIUS_ODDS)
    reach = [0.0] * len(legs)
    corners, radii = [], []
    for k, leg in enumerate(legs):
        m = (k + 1) % len(legs)
        after = legs[m]
        angle = (after.heading - leg.heading) % (2 * math.pi)
        if angle > STRAIGHT or angle < math.radians(8):
            continue
        radius = usual if odds.chance(rng, 0.6) else pick_between(rng, odds.CORNER_RADIUS_ODDS)
        a, b = roads[leg.road].half, roads[after.road].half
        bare = (b + a * math.cos(angle)) / math.sin(angle), (a + b * math.cos(angle)) / math.sin(angle)
        radius = max(0.0, min(radius, (LONGEST_RETURN - max(bare)) * math.tan(angle / 2)))
        tangent = radius / math.tan(angle / 2)
        reach[k] = max(reach[k], bare[0] + tangent)
        reach[m] = max(reach[m], bare[1] + tangent)
        radii.append(radius)
        if radius > 0.05:
            corners += _corner(roads, (leg, after), max(bare) + tangent, radius)
    legs = [Leg(g.road, g.station, g.sign, g.heading, max(r, 0.0)) for g, r in zip(legs, reach, strict=True)]
    return Junction(x, y, tuple(legs), tuple(corners), tuple(radii))


def _corner(roads: list[Road], pair: tuple[Leg, Leg], reach: float, radius: float) -> list[Polygon]:
    """The sliver that rounds the corner between two neighbouring legs: a closing with a disc of `radius`."""
    arms = []
    for leg in pair:
        road = roads[leg.road]
        end = leg.station + leg.sign * (reach + 3.0)
        s0, s1 = sorted((leg.station, min(max(end, 0.0), road.axis.length)))
        arms.append(road.axis.strip(s0, s1, -road.half, road.half))
    both = shapely.union_all(arms)
    closed = both.buffer(radius, join_style="mitre").buffer(-radius, quad_segs=quad_segments(radius))
    pieces = shapely.get_parts(shapely.difference(closed, both))
    return [p for p in pieces if isinstance(p, Polygon) and p.area > max(1e-3, 0.01 * radius * radius)]
