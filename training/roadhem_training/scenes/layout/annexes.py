"""What widens or narrows a street: bays, turning lanes, build-outs, and how dead ends end."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry import Polygon

from roadhem_training.scenes.layout import odds
from roadhem_training.scenes.layout.alignment import quad_segments
from roadhem_training.scenes.layout.junctions import closing
from roadhem_training.scenes.layout.odds import Span, between, chance, pick
from roadhem_training.scenes.layout.overlay import joined, polygons, shared
from roadhem_training.scenes.layout.plan import Change, Edging, Island, Part, Plan, Road
from roadhem_training.scenes.world import Cover

Rng = np.random.Generator

BAY_DEPTH = (2.0, 2.6)
CROSSWISE_DEPTH = (4.8, 5.5)
STALL_WIDE, STALL_LONG, STALL_LINES = (2.3, 2.7), (5.0, 6.2), 0.5
BUS_BAY_DEPTH, BUS_BAY_LENGTH = (2.6, 3.2), (14.0, 30.0)
TAPER = {"bay": (0.0, 2.5), "bus": (6.0, 14.0), "turn": (8.0, 20.0)}
TURN_LANE = (2.75, 3.3)
BUILD_OUT = (1.6, 2.4)
BULB_RADIUS = (6.5, 14.0)  # cul-de-sacs have 10.7–15.2 m in one handbook, narrow streets less
HAMMER = ((9.0, 16.0), (4.0, 6.0))
OVERLAP = 0.3  # metres by which a part reaches into the road it widens


def bays(rng: Rng, plan: Plan, share: float) -> None:
    """Add parking and bus bays, turning lanes and build-outs along the plan's roads."""
    for k, road in enumerate(plan.roads):
        if road.rank not in ("main", "street", "close"):
            continue
        for a, b in plan.clear_spans(k, 14.0):
            for side in (-1, 1):
                if not chance(rng, share):
                    continue
                what = pick(rng, {"parking": 0.5, "bus": 0.12, "turn": 0.15, "build_out": 0.23})
                {"parking": _parking, "bus": _bus, "turn": _turn, "build_out": _build_out}[what](
                    rng, plan, k, side, a, b
                )


def _parking(rng: Rng, plan: Plan, k: int, side: int, a: float, b: float) -> None:
    """A bay for cars: of other paving and flush, or with the road's own surface and the curb behind it."""
    s0 = a + rng.uniform(1, 5)
    s1 = min(b - rng.uniform(1, 5), s0 + rng.uniform(10, 45))
    if s1 - s0 < 8 or not plan.take(k, side, s0 - 1, s1 + 1):
        return
    road = plan.roads[k]
    edging = road.left if side > 0 else road.right
    crosswise = chance(rng, 0.25)
    depth = between(rng, CROSSWISE_DEPTH if crosswise else BAY_DEPTH)
    if chance(rng, 0.5):
        material = pick(rng, {"setts": 0.35, "pavers": 0.4, "gravel": 0.1, "concrete": 0.15})
        flush = Edging("flush", 0.0, stone=edging.stone if chance(rng, 0.5) else 0.0, verge=depth,
                       verge_material=material, footway=edging.footway, footway_material=edging.footway_material,
                       stone_material=edging.stone_material, stone_tone=edging.stone_tone)  # fmt: skip
        plan.changes.append(Change(k, side, s0, s1, flush, "flush_bay"))
    else:
        area = _widening(road, side, s0, s1, depth, between(rng, TAPER["bay"]))
        tone = road.tone + (0.0 if chance(rng, 0.7) else 0.4)
        plan.parts.append(Part(area, edging, road.material, tone, "cross_bay" if crosswise else "bay"))
    _stall_lines(rng, plan, road, side, (s0, s1), depth, crosswise)


def _stall_lines(
    rng: Rng, plan: Plan, road: Road, side: int, span: Span, depth: float, crosswise: bool
) -> None:
    """Lines or darker rows of stones between the stalls of a bay."""
    every = between(rng, STALL_WIDE if crosswise else STALL_LONG)
    s = np.arange(span[0] + 1.0, span[1] - 1.0, every)
    same = np.ones(len(s))
    near, far = sorted((side * (road.half + 0.1), side * (road.half + depth - 0.1)))
    lines = road.axis.cells(s, s + 0.1, near * same, far * same)
    if chance(rng, STALL_LINES) and len(s):
        plan.covers.append(Cover(lines, pick(rng, {"snow": 0.7, "setts": 0.3}), rng.uniform(-0.4, 0.0)))


def _bus(rng: Rng, plan: Plan, k: int, side: int, a: float, b: float) -> None:
    length, taper = between(rng, BUS_BAY_LENGTH), between(rng, TAPER["bus"])
    s0 = a + rng.uniform(1, 4)
    s1 = s0 + length + 2 * taper
    if s1 > b - 1 or not plan.take(k, side, s0, s1):
        return
    road = plan.roads[k]
    area = _widening(road, side, s0, s1, between(rng, BUS_BAY_DEPTH), taper)
    material = pick(rng, {road.material: 0.75, "concrete": 0.25})
    plan.parts.append(Part(area, road.left if side > 0 else road.right, material, road.tone, "bus_bay"))


def _turn(rng: Rng, plan: Plan, k: int, side: int, a: float, b: float) -> None:
    """One lane more before a junction."""
    taper, length = between(rng, TAPER["turn"]), rng.uniform(10, 30)
    road = plan.roads[k]
    s0 = max(a + 1, b - length - taper) if side < 0 else a
    s1 = b if side < 0 else min(b - 1, a + length + taper)
    if s1 - s0 < taper + 4 or road.rank != "main" or not plan.take(k, side, s0, s1):
        return
    wide = between(rng, TURN_LANE)

    def far(s: NDArray[np.float64]) -> NDArray[np.float64]:
        along = (s - s0) if side < 0 else (s1 - s)
        return side * (road.half + wide * _smooth(along / taper))

    near = side * (road.half - OVERLAP)
    area = road.beside(side, s0, s1, near, far, step=0.4)
    plan.parts.append(
        Part(area, road.left if side > 0 else road.right, road.material, road.tone, "turn_lane")
    )
    others = [r.area for j, r in enumerate(plan.roads) if j != k]
    end = shapely.Point(road.axis.at(s1 if side < 0 else s0, side * (road.half + wide))).buffer(12)
    near_by = shared(joined([area, road.area, *others]), end)
    for piece in closing(near_by, rng.uniform(0.5, 4.0)):
        if piece.intersection(end.boundary).is_empty:
            plan.parts.append(Part(piece, road.left, road.material, road.tone, "turn_lane"))


def _smooth(x: NDArray[np.float64]) -> NDArray[np.float64]:
    x = np.clip(x, 0.0, 1.0)
    return x * x * (3 - 2 * x)


def _widening(road: Road, side: int, s0: float, s1: float, depth: float, taper: float) -> Polygon:
    """A bay from s0 to s1 with straight tapers, its corners slightly rounded."""
    taper = min(taper, 0.45 * (s1 - s0))

    def far(s: NDArray[np.float64]) -> NDArray[np.float64]:
        ramp = np.minimum(s - s0, s1 - s) / taper if taper > 0.05 else np.ones_like(s)
        return side * (road.half + depth * np.clip(ramp, 0.0, 1.0))

    return road.beside(side, s0, s1, side * (road.half - OVERLAP), far, step=0.5)


def _build_out(rng: Rng, plan: Plan, k: int, side: int, a: float, b: float) -> None:
    """The footway brought forward into a wide street, most often at a junction."""
    road = plan.roads[k]
    deep, length = between(rng, BUILD_OUT), rng.uniform(3, 9)
    s0 = a if chance(rng, 0.6) else rng.uniform(a, b - length)
    s1 = s0 + length
    if road.width - 2 * deep < 5.2 or s1 > b or not plan.take(k, side, s0 - 0.5, s1 + 0.5):
        return
    taper = rng.uniform(0.3, 2.0)

    def far(s: NDArray[np.float64]) -> NDArray[np.float64]:
        return side * (road.half - deep * np.clip(np.minimum(s - s0, s1 - s) / taper, 0.02, 1.0))

    area = road.beside(side, s0, s1, far, side * (road.half + 0.2), step=0.3)
    edging = road.left if side > 0 else road.right
    fill = pick(rng, odds.ISLAND_FILL) if chance(rng, 0.4) else edging.footway_material
    plan.islands.append(Island(area, replace(edging, verge=0.0, footway=0.0), fill, "build_out"))


def dead_ends(rng: Rng, plan: Plan, window: Polygon) -> None:
    """Give every road that ends inside `window` a bulb, a turning head or a plain end."""
    for k, road in enumerate(plan.roads):
        for s, sign in plan.ends(k):
            if not shapely.contains_xy(window, *road.axis.at(s)):
                continue
            if chance(rng, 0.75):
                _head(rng, plan, road, s, sign)


def _head(rng: Rng, plan: Plan, road: Road, s: float, sign: int) -> None:
    a, b = sorted((s, max(0.0, min(road.axis.length, s - sign * 30.0))))
    tail = road.axis.strip(a, b, -road.half, road.half)
    x, y = road.axis.at(s)
    if chance(rng, 0.7):
        radius = max(road.half + 1.0, between(rng, BULB_RADIUS))
        off = rng.uniform(-1, 1) * (radius - road.half) if chance(rng, 0.3) else 0.0
        x, y = road.axis.at(s, off)
        head = shapely.Point(x, y).buffer(radius, quad_segs=quad_segments(radius))
        if radius > 11 and chance(rng, 0.4):
            inner = radius - rng.uniform(5.0, 6.5)
            middle = shapely.Point(x, y).buffer(inner, quad_segs=quad_segments(inner))
            plan.islands.append(Island(middle, road.left.bare(), pick(rng, odds.ISLAND_FILL), "round"))
    else:
        length, wide = (between(rng, span) for span in HAMMER)
        a, b = sorted((max(0.0, s - sign * wide), s))
        head = road.axis.strip(a, b, -0.5 * length, 0.5 * length)
    pieces = [head, *closing(joined([head, tail]), rng.uniform(2, 9))]
    for piece in polygons(joined(pieces)):
        plan.parts.append(Part(piece, road.left, road.material, road.tone, "head"))
