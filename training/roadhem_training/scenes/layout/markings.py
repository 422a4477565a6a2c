"""Road markings with handbook sizes.

Normal lines 0.10–0.15 m, wide ones twice that, broken lines 3.05 m with gaps of 9.14 m, crosswalk lines 0.15–0.60 m
[read: MUTCD 2003 and secondary pages]; stop lines 0.30–0.61 m wide, 1.2 m before a crosswalk [memory]; European
broken lines 3 + 6 m, arrows 5 m long [memory].
"""

from __future__ import annotations

import math

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry import LineString, MultiPolygon, Polygon
from shapely.geometry.base import BaseGeometry

from roadhem_training.scenes.layout.odds import between, chance, pick
from roadhem_training.scenes.layout.overlay import clipped, joined, less, shared
from roadhem_training.scenes.layout.plan import Crosswalk, Leg, Plan, Road
from roadhem_training.scenes.world import OtherLine, Paint

Rng = np.random.Generator

LINE_WIDTH = (0.10, 0.15)
STOP_WIDTH = (0.30, 0.61)
STOP_BEFORE = 1.2
DASHES = {(3.05, 9.14): 0.35, (3.0, 6.0): 0.45, (6.0, 12.0): 0.2}
BAR_WIDTH, BAR_GAP = (0.30, 0.60), (0.40, 0.70)
TRANSVERSE = 0.25  # share of crosswalks that are two lines across the road
TRANSVERSE_WIDTH = (0.15, 0.60)
CENTRE_SOLID, CENTRE_DOUBLE = 0.3, 0.12
STOP_LINE, ARROWS = 0.45, 0.3
YELLOW = 0.25
CURB_EDGE_LINE = 0.12  # share of streets with curbs that have edge lines all the same
FLUSH_EDGE_LINE = 0.7
EDGE_LINE_IN = (0.1, 0.3)
CYCLE_LANE, CYCLE_WIDTH = 0.18, (1.25, 2.0)
LEAST_LINE = 2.0
NO_STOPPING = 0.08  # painted along the curb


def paint(rng: Rng, plan: Plan, surface: MultiPolygon) -> tuple[list[Paint], list[OtherLine]]:
    """All markings of the plan, and the lines they make that could be taken for an edge."""
    colour = "yellow" if chance(rng, YELLOW) else "white"
    paints, lines = [], []
    wears = [float(rng.beta(1.5, 2.5)) for _ in plan.roads]
    for k, road in enumerate(plan.roads):
        if not road.marked:
            continue
        dash, width = pick(rng, DASHES), between(rng, LINE_WIDTH)
        strips = [*_lane_lines(rng, road, colour), *_side_lines(rng, road)]
        for a, b in plan.clear_spans(k):
            for offset, wide, solid, tint in strips:
                area = _line(road, a, b, offset, wide * width, None if solid else dash)
                paints.append(Paint(area, tint, wears[k]))
                lines.append(OtherLine(LineString(road.axis.parallel(a, b, offset)), "marking"))
    for walk in plan.crosswalks:
        if walk.marked:
            paints.append(Paint(_bars(rng, plan.roads[walk.road], walk), "white", wears[walk.road]))
    for node in plan.junctions:
        for leg in node.legs:
            road = plan.roads[leg.road]
            if road.marked and road.lanes >= 2:
                paints += [Paint(g, "white", wears[leg.road]) for g in _at_leg(rng, plan, road, leg)]
    pieces = clipped([line.line for line in lines], surface, LEAST_LINE)
    return on(surface, paints + plan.paints), [OtherLine(p, "marking") for own in pieces for p in own]


def _lane_lines(rng: Rng, road: Road, colour: str) -> list[tuple[float, float, bool, str]]:
    """(offset, width factor, solid, colour) of the lines between lanes."""
    right, left = road.shoulders
    if road.median:
        lane = 0.5 * (road.width - road.median) / (road.lanes // 2)
        inner = [0.5 * road.median + k * lane for k in range(1, road.lanes // 2)]
        return [(side * d, 1.0, False, "white") for d in inner for side in (-1, 1)]
    lane = (road.width - right - left) / road.lanes
    out = []
    for k in range(1, road.lanes):
        at = k * lane + right - road.half
        if road.oneway or 2 * k != road.lanes:
            out.append((at, 1.0, False, "white"))
        elif chance(rng, CENTRE_DOUBLE):
            out += [(at - 0.15, 1.0, True, colour), (at + 0.15, 1.0, True, colour)]
        else:
            out.append((at, 1.0, chance(rng, CENTRE_SOLID), colour))
    return out


def _side_lines(rng: Rng, road: Road) -> list[tuple[float, float, bool, str]]:
    out: list[tuple[float, float, bool, str]] = []
    flush = "flush" in (road.left.kind, road.right.kind)
    if max(road.shoulders) > 0:
        right, left = road.shoulders
        return [(right - road.half, 1.6, True, "white"), (road.half - left, 1.6, True, "white")]
    if chance(rng, FLUSH_EDGE_LINE if flush else CURB_EDGE_LINE):
        at, wide = road.half - between(rng, EDGE_LINE_IN), pick(rng, {1.0: 0.7, 2.0: 0.3})
        out += [(-at, wide, True, "white"), (at, wide, True, "white")]
    elif road.width > 8 and not any(road.parking) and chance(rng, CYCLE_LANE):
        at = road.half - between(rng, CYCLE_WIDTH)
        out += [(-at, 1.0, True, "white"), (at, 1.0, True, "white")]
    elif chance(rng, NO_STOPPING):
        out.append((road.half - 0.12, 1.2, True, pick(rng, {"yellow": 0.7, "red": 0.3})))
    return out


def _line(
    road: Road, a: float, b: float, offset: float, width: float, dash: tuple[float, float] | None
) -> BaseGeometry:
    lo, hi = offset - 0.5 * width, offset + 0.5 * width
    if dash is None:
        return road.axis.strip(a, b, lo, hi)
    starts = np.arange(a, b - dash[0], sum(dash))
    same = np.ones(len(starts))
    return road.axis.cells(starts, starts + dash[0], lo * same, hi * same)


def _bars(rng: Rng, road: Road, walk: Crosswalk) -> MultiPolygon:
    if chance(rng, TRANSVERSE):
        width = between(rng, TRANSVERSE_WIDTH)
        s = np.array([walk.s0, walk.s1 - width])
        side = np.full(2, road.half - 0.1)
        return road.axis.cells(s, s + width, -side, side)
    bar, gap = between(rng, BAR_WIDTH), between(rng, BAR_GAP)
    d = np.arange(-road.half + 0.35, road.half - 0.35 - bar, bar + gap)
    return road.axis.cells(np.full(len(d), walk.s0), np.full(len(d), walk.s1), d, d + bar)


def _at_leg(rng: Rng, plan: Plan, road: Road, leg: Leg) -> list[BaseGeometry]:
    """Stop line and arrows for those who come in."""
    walks = [w for w in plan.crosswalks if plan.roads[w.road] is road]
    near = leg.reach + rng.uniform(0.2, 1.0)
    for walk in walks:
        far = max((walk.s0 - leg.station) * leg.sign, (walk.s1 - leg.station) * leg.sign)
        if 0 < far < leg.reach + 8:
            near = far + STOP_BEFORE
    inner, outer = (0.0, road.half - 0.2) if leg.sign > 0 else (-road.half + 0.2, 0.0)
    if road.oneway:
        inner, outer = -road.half + 0.2, road.half - 0.2
    width = between(rng, STOP_WIDTH)
    s = [leg.station + leg.sign * d for d in (near, near + width, near + 4, near + 9)]
    if min(s) < 0 or max(s) > road.axis.length:
        return []
    out: list[BaseGeometry] = []
    if chance(rng, STOP_LINE):
        s0, s1 = sorted(s[:2])
        out.append(road.axis.cells(*(np.array([v]) for v in (s0, s1, inner, outer))))
    if road.lanes >= 3 and chance(rng, ARROWS):
        lane = road.width / road.lanes
        for d in np.arange(inner + (0.5 * lane if inner == 0 else lane / 2 - 0.2), outer, lane):
            out.append(_arrow(road, s[2], d, leg.sign, pick(rng, {"ahead": 0.6, "turn": 0.4})))
    return out


def _arrow(road: Road, s: float, d: float, sign: int, what: str) -> BaseGeometry:
    """An arrow of 5 m pointing at the junction, its tip at station s."""
    x, y = road.axis.at(s, d)
    heading = road.axis.heading(s) + (math.pi if sign > 0 else 0.0)
    shape = _AHEAD if what == "ahead" else _TURN
    c, n = math.cos(heading), math.sin(heading)
    return Polygon(shape @ np.array([[c, n], [-n, c]]) + [x, y])


_AHEAD: NDArray[np.float64] = np.array(
    [[0, 0], [-1.8, 0.45], [-1.8, 0.08], [-5, 0.08], [-5, -0.08], [-1.8, -0.08], [-1.8, -0.45]]
)
_TURN: NDArray[np.float64] = np.array(
    [[-0.6, 0.9], [-0.1, 0.3], [-0.5, 0.3], [-0.5, -0.08], [-5, -0.08], [-5, 0.08], [-0.7, 0.08], [-0.7, 0.3],
     [-1.1, 0.3]]
)  # fmt: skip


def hatching(area: Polygon, heading: float, colour: str = "white", wear: float = 0.3) -> list[Paint]:
    """Oblique bars over `area`, a metre wide and two apart, with a line round it."""
    if area.is_empty:
        return []
    x, y = shapely.get_coordinates(area.centroid)[0]
    reach = math.hypot(area.bounds[2] - area.bounds[0], area.bounds[3] - area.bounds[1])
    u = np.array([math.cos(heading + 0.8), math.sin(heading + 0.8)])
    v = np.array([-u[1], u[0]])
    bars = [LineString([[x, y] + t * v - reach * u, [x, y] + t * v + reach * u]).buffer(0.4, cap_style="flat")
            for t in np.arange(-reach, reach, 2.6)]  # fmt: skip
    line = less(area, area.buffer(-0.13))
    return [Paint(joined([shared(joined(bars), area), line]), colour, wear)]


def on(surface: MultiPolygon, paints: list[Paint]) -> list[Paint]:
    """The markings as far as they lie on the surface."""
    shapely.prepare(surface)
    out = []
    for p in paints:
        if surface.contains(p.area):
            out.append(p)
        elif surface.intersects(p.area):
            left = shared(surface, p.area)
            if not left.is_empty:
                out.append(Paint(left, p.colour, p.wear))
    return out
