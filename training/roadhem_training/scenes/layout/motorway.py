"""Motorways: two carriageways, a median or barrier between them, ramps, a road beside."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry import LineString, Polygon, box

from roadhem_training.scenes.layout import odds
from roadhem_training.scenes.layout.alignment import Alignment, from_curvature
from roadhem_training.scenes.layout.country import _curb, _inside, through
from roadhem_training.scenes.layout.junctions import junctions
from roadhem_training.scenes.layout.markings import hatching
from roadhem_training.scenes.layout.odds import between, chance, pick
from roadhem_training.scenes.layout.overlay import shared
from roadhem_training.scenes.layout.plan import Edging, Junction, Part, Plan, Road
from roadhem_training.scenes.layout.streets import flush_edging
from roadhem_training.scenes.layout.surface import PLAN_REACH
from roadhem_training.scenes.world import Body

Rng = np.random.Generator
Profile = Callable[[NDArray[np.float64]], NDArray[np.float64]]

LANES = {2: 0.55, 3: 0.35, 4: 0.1}
LANE = (3.4, 3.75)
HARD_SHOULDER, INNER_SHOULDER = (1.5, 3.0), (0.4, 1.0)
MEDIAN = {(1.5, 4.0): 0.6, (4.0, 12.0): 0.4}
RADIUS = (350.0, 2500.0)
RAMP_WIDTH = (4.5, 7.0)
RAMP_RADIUS = (45.0, 160.0)
RAMP_ODDS = 0.8  # share of carriageways with a ramp in reach of the frame
PART_ANGLE = 0.35  # radians between a ramp and the carriageway where it is on its own
NOSE = (0.5, 3.0)  # width of the blunt end between carriageway and ramp
BESIDE = 0.65  # share of places with a common road along the motorway
BESIDE_GAP = (8.0, 25.0)
INNER_CURB = 0.35
WALL_BESIDE = 0.3


def plan_motorway(rng: Rng, size: float, style: str) -> Plan:
    """A motorway through the frame, with ramps and often a road beside it."""
    window = box(-PLAN_REACH, -PLAN_REACH, size + PLAN_REACH, size + PLAN_REACH)
    plan = Plan(size, style, land=odds.LAND[style], driveway_every=(40.0, 120.0))
    length = 2.0 * (size + 2 * PLAN_REACH) + 300.0
    k0, k1 = (rng.choice([-1, 1]) / between(rng, RADIUS) * float(chance(rng, 0.7)) for _ in range(2))
    axis = through(rng, from_curvature(0, 0, 0, [0.35 * length, 0.3 * length, 0.35 * length], [k0, k0, k1, k1]),
                   *(0.5 * size + rng.normal(0, 0.08 * size, 2)))  # fmt: skip
    gap = odds.pick_between(rng, MEDIAN)
    pair = [_carriageway(rng, axis, gap, side) for side in (-1, 1)]
    if chance(rng, 0.75):
        pair[1] = replace(pair[1], material=pair[0].material, tone=pair[0].tone)
    plan.roads += pair
    ramped = [chance(rng, RAMP_ODDS) for _ in pair]
    for road, wanted in zip(pair, ramped, strict=True):
        if wanted:
            _ramp(rng, plan, road, window)
    _middle(rng, plan, axis, gap)
    first = len(plan.roads)
    for side, road, has_ramp in zip((-1, 1), pair, ramped, strict=True):
        if not has_ramp and chance(rng, BESIDE):
            _road_beside(rng, plan, axis, side * (0.5 * gap + road.width), window)
    nodes, plan.islands = junctions(rng, plan.roads[first:], window, roundabouts=0.0)
    plan.junctions = [_renumbered(node, first) for node in nodes]
    return plan


def _renumbered(node: Junction, first: int) -> Junction:
    return replace(node, legs=tuple(replace(leg, road=leg.road + first) for leg in node.legs))


def _carriageway(rng: Rng, axis: Alignment, gap: float, side: int) -> Road:
    """The carriageway right (-1) or left (1) of the axis; its own axis runs with the traffic."""
    lanes = pick(rng, LANES)
    outer, inner = between(rng, HARD_SHOULDER), between(rng, INNER_SHOULDER)
    width = lanes * between(rng, LANE) + outer + inner
    xy = axis.parallel(0.0, axis.length, side * 0.5 * (gap + width))
    soft = flush_edging(rng)
    inside = replace(_curb(rng), footway=0.0) if chance(rng, INNER_CURB) else flush_edging(rng)
    return Road(axis=Alignment(xy if side < 0 else xy[::-1]), width=width, lanes=lanes, rank="motorway", right=soft,
                left=inside, material=pick(rng, {"asphalt": 0.7, "concrete": 0.3}),
                tone=float(np.clip(rng.normal(0, 0.45), -1, 1)), oneway=True, shoulders=(outer, inner))  # fmt: skip


def _ramp(rng: Rng, plan: Plan, road: Road, window: Polygon) -> None:
    """A lane that joins or leaves on the right, its gore rounded and hatched."""
    width, radius = between(rng, RAMP_WIDTH), between(rng, RAMP_RADIUS)
    along, taper = rng.uniform(20, 150), rng.uniform(20, 60)
    gore = 0.5 * road.axis.length + rng.normal(0, 0.2 * plan.size)
    leaving = chance(rng, 0.5)
    sign = 1 if leaving else -1
    near, far = -(road.half - 0.5 * width), -(road.half + 0.5 * width - 0.4)

    def offset(s: NDArray[np.float64]) -> NDArray[np.float64]:
        ahead = sign * (s - gore)
        ease = np.clip((ahead + along + taper) / taper, 0, 1)
        away = np.clip(ahead, 0, None) ** 2 / (2 * radius)
        return near + (far - near) * ease * ease * (3 - 2 * ease) - away

    s0, s1 = sorted((gore - sign * (along + taper), gore + sign * PART_ANGLE * radius))
    if s0 < 0 or s1 > road.axis.length:
        return
    xy = road.axis.parallel(s0, s1, offset, step=1.0)[::sign]
    d = xy[-1] - xy[-2]
    x, y = map(float, xy[-1])
    away = from_curvature(x, y, math.atan2(d[1], d[0]), [rng.uniform(20, 80), 30.0, 400.0],
                          [-sign / radius, -sign / radius, 0.0, rng.normal(0, 0.002)])  # fmt: skip
    line = LineString(np.concatenate([xy, away.xy[1:]])[::sign]).simplify(0.002)
    ramp = Road(axis=Alignment(shapely.get_coordinates(line)), width=width, lanes=1, rank="ramp", right=road.right,
                left=flush_edging(rng), material=road.material, tone=road.tone, oneway=True,
                shoulders=(0.6, 0.4))  # fmt: skip
    plan.roads.append(ramp)
    _gore(rng, plan, road, ramp.left, lambda s: offset(s) + 0.5 * width, gore, sign * radius)


def _gore(
    rng: Rng, plan: Plan, road: Road, edging: Edging, ramp_edge: Profile, gore: float, radius: float
) -> None:
    """The paved and hatched wedge between carriageway and ramp, up to its blunt nose."""
    nose = gore + math.copysign(math.sqrt(2 * abs(radius) * between(rng, NOSE)), radius)
    s0, s1 = sorted((gore, nose))
    wedge = road.axis.strip(s0, s1, lambda s: ramp_edge(s) - 0.4, 0.4 - road.half, step=1.0)
    plan.parts.append(Part(wedge, edging, road.material, road.tone, "gore"))
    plan.paints += hatching(wedge.buffer(-0.2), road.axis.heading(gore))


def _middle(rng: Rng, plan: Plan, axis: Alignment, gap: float) -> None:
    """Guard rails or a concrete wall between the carriageways."""
    what = pick(rng, {"rail": 0.55, "wall": 0.25, "none": 0.2})
    offsets = {"rail": (-0.35 * gap, 0.35 * gap), "wall": (0.0,), "none": ()}[what]
    half, top = {"rail": (0.15, 0.75), "wall": (0.3, 0.9), "none": (0.0, 0.0)}[what]
    frame = box(-PLAN_REACH, -PLAN_REACH, plan.size + PLAN_REACH, plan.size + PLAN_REACH)
    for d in offsets:
        strip = axis.strip(0, axis.length, d - half, d + half)
        plan.bodies += [Body(p, top, what, 0.0, rng.random()) for p in shared(strip, frame).geoms]


def _road_beside(rng: Rng, plan: Plan, axis: Alignment, border: float, window: Polygon) -> None:
    """A common road along the motorway, outside `border` (metres left of its axis), with turnings."""
    side = 1 if border > 0 else -1
    width = rng.uniform(4.5, 9)
    away = border + side * (between(rng, BESIDE_GAP) + 0.5 * width)
    edging: list[Edging] = [_curb(rng) if chance(rng, 0.6) else flush_edging(rng) for _ in range(2)]
    for part in _inside(Alignment(axis.parallel(0, axis.length, away)), window):
        road = Road(axis=part, width=width, lanes=2 if width > 5 else 1, rank="street", right=edging[0],
                    left=edging[1], tone=float(rng.normal(0, 0.4)), marked=chance(rng, 0.6))  # fmt: skip
        plan.roads.append(road)
        at = rng.uniform(10, 60)
        while at < part.length - 10:
            x, y = part.at(at)
            heading = part.heading(at) + side * math.radians(rng.uniform(60, 120))
            turn = from_curvature(
                float(x), float(y), heading, [20.0, 200.0], [0.0, 0.0, rng.normal(0, 0.004)]
            )
            for leg in _inside(turn, window)[:1]:
                plan.roads.append(replace(road, axis=leg, width=rng.uniform(4.5, 8), rank="alley"))
            at += rng.uniform(35, 110)
