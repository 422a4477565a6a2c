"""Vehicles: parked along curbs, where they hide its foot, and moving in the lanes."""

from __future__ import annotations

import math

import numpy as np
import shapely
from shapely.geometry import MultiPolygon

from roadhem_training.scenes.layout.alignment import Alignment
from roadhem_training.scenes.layout.odds import between, chance
from roadhem_training.scenes.layout.plan import Plan, Road
from roadhem_training.scenes.layout.shapes import oriented_box
from roadhem_training.scenes.layout.stretches import OpenChain, Stretch
from roadhem_training.scenes.world import Body

CAR_LENGTH, CAR_WIDTH, CAR_HEIGHT = (3.6, 4.9), (1.65, 1.95), (1.35, 1.9)
TRUCK_LENGTH, TRUCK_WIDTH, TRUCK_HEIGHT = (7.0, 16.5), (2.3, 2.55), (2.8, 4.0)
FROM_CURB = (0.1, 0.4)  # metres from the wheels to the foot of the curb
USUAL_LENGTH, USUAL_WIDTH, STALL = 4.5, 1.8, 2.5
BUMPER_GAP = (0.6, 2.0)
CLEAR_OF_JUNCTION = 5.0
GROUND_CLEARANCE = 0.15
BAY_PAVING = ("setts", "pavers", "concrete", "gravel")
VANS = 0.12
MOVING_EVERY = (18.0, 70.0)
TRUCKS = 0.12


def vehicle(rng: np.random.Generator, x: float, y: float, heading: float, truck: bool = False) -> Body:
    """A car, or a truck, about (x, y)."""
    sizes = (TRUCK_LENGTH, TRUCK_WIDTH, TRUCK_HEIGHT) if truck else (CAR_LENGTH, CAR_WIDTH, CAR_HEIGHT)
    length, width, height = (between(rng, span) for span in sizes)
    if not truck and chance(rng, VANS):
        length, width, height = 5.4, 2.0, 2.4
    shape = oriented_box(x, y, length, width, heading)
    shape = shape.buffer(-0.3, join_style="mitre").buffer(0.3, quad_segs=3)
    return Body(shape, height, "truck" if truck else "car", GROUND_CLEARANCE, rng.random(), direction=heading)


def parked(rng: np.random.Generator, plan: Plan, stretches: list[Stretch]) -> list[Body]:
    """Rows along the sides of roads where parking is allowed, not before driveways or junctions."""
    out = []
    nodes = shapely.MultiPoint([(n.x, n.y) for n in plan.junctions])
    for stretch in stretches:
        road = plan.roads[stretch.road] if stretch.road >= 0 else None
        street = road is not None and road.rank in ("main", "street", "close")
        flush = street and stretch.edging.kind == "flush" and stretch.edging.verge > USUAL_WIDTH
        bay = stretch.owner.endswith("bay") or (flush and stretch.edging.verge_material in BAY_PAVING)
        allowed = road is not None and road.parking[0 if stretch.side < 0 else 1]
        if not (bay or allowed) or stretch.edging.kind == "lowered" or stretch.line.length < 6:
            continue
        chain, full = OpenChain(stretch.line), rng.uniform(0.3, 0.95)
        side = -1.0 if flush and bay else 1.0
        cross = bay and (stretch.owner == "cross_bay" or (flush and stretch.edging.verge > USUAL_LENGTH))
        long, wide = (STALL, USUAL_LENGTH) if cross else (USUAL_LENGTH, USUAL_WIDTH)
        at = rng.uniform(0.5, 3.0)
        while at + long < chain.length:
            (x, y), d = chain.frame(at + 0.5 * long)
            inward = side * (between(rng, FROM_CURB) + 0.5 * wide)
            x, y = x - d[1] * inward, y + d[0] * inward
            half = road.half if road else 0.0
            far = nodes.is_empty or nodes.distance(shapely.Point(x, y)) > half + CLEAR_OF_JUNCTION + 3
            if (far or bay) and chance(rng, full):
                turn = math.pi / 2 if cross else 0.0
                out.append(vehicle(rng, x, y, math.atan2(d[1], d[0]) + turn + rng.normal(0, 0.015)))
            at += long + (0.0 if cross else between(rng, BUMPER_GAP))
    return out


def moving(rng: np.random.Generator, plan: Plan, surface: MultiPolygon) -> list[Body]:
    """Vehicles under way, each in its lane and on the surface."""
    out = []
    for k, road in enumerate(plan.roads):
        for a, b in plan.clear_spans(k):
            at = a + rng.uniform(0, MOVING_EVERY[1])
            while at < b - 3:
                out.append(_in_lane(rng, road.axis, at, *_lane(rng, road)))
                at += between(rng, MOVING_EVERY)
    shapely.prepare(surface)
    return [v for v in out if surface.contains(v.footprint)]


def _lane(rng: np.random.Generator, road: Road) -> tuple[float, bool]:
    """Offset of a lane's middle from the axis, and whether it runs with the axis (traffic keeps right)."""
    lane = int(rng.integers(road.lanes))
    width = (road.width - road.median) / road.lanes
    offset = (lane + 0.5) * width - 0.5 * (road.width - road.median)
    return offset + np.sign(offset) * 0.5 * road.median, road.oneway or offset < 0


def _in_lane(rng: np.random.Generator, axis: Alignment, s: float, offset: float, with_axis: bool) -> Body:
    x, y = axis.at(s, offset + rng.normal(0, 0.15))
    heading = axis.heading(s) + (0.0 if with_axis else math.pi) + rng.normal(0, 0.02)
    return vehicle(rng, float(x), float(y), heading, chance(rng, TRUCKS))


def apart(bodies: list[Body]) -> list[Body]:
    """The bodies that overlap none of those kept before them."""
    if not bodies:
        return []
    shapes = [b.footprint for b in bodies]
    pairs = shapely.STRtree(shapes).query(shapes, predicate="intersects").T.tolist()
    dropped: set[int] = set()
    for i, j in sorted(pairs):
        if i < j and i not in dropped:
            dropped.add(j)
    return [b for k, b in enumerate(bodies) if k not in dropped]
