"""Country roads: one carriageway with soft or curbed ends, side roads, field tracks."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import shapely
from shapely.geometry import LineString, box

from roadhem_training.scenes.layout import odds
from roadhem_training.scenes.layout.alignment import Alignment, from_curvature
from roadhem_training.scenes.layout.annexes import dead_ends
from roadhem_training.scenes.layout.junctions import junctions
from roadhem_training.scenes.layout.lots import place_lots
from roadhem_training.scenes.layout.medians import medians
from roadhem_training.scenes.layout.odds import Span, between, chance, pick
from roadhem_training.scenes.layout.plan import Change, Edging, Plan, Road
from roadhem_training.scenes.layout.streets import flush_edging
from roadhem_training.scenes.layout.surface import PLAN_REACH, rough_surface
from roadhem_training.scenes.world import Cover

Rng = np.random.Generator

WIDTH: dict[Span, float] = {(2.8, 4.5): 0.3, (4.5, 6.5): 0.4, (6.5, 8.5): 0.3}
SURFACE = {"asphalt": 0.8, "concrete": 0.2}
BEND_RADIUS = {(25.0, 60.0): 0.15, (60.0, 160.0): 0.35, (160.0, 500.0): 0.5}
BEND_LENGTH, STRAIGHT_LENGTH, RAMP_LENGTH = (15.0, 70.0), (10.0, 120.0), (10.0, 30.0)
SIDE_ROAD_EVERY = (35.0, 110.0)
CURBED = 0.15  # share of sides with a curb all along, as in villages
CURBED_PIECE = 0.3  # share of sides with a curbed piece
TRACKS_PER_100_M = 0.7
LAY_BY = 0.12


def winding(rng: Rng, length: float) -> Alignment:
    """An axis of straights, clothoids and arcs, starting at the origin eastwards."""
    lengths: list[float] = []
    curvatures = [0.0]
    while sum(lengths) < length:
        lengths.append(between(rng, STRAIGHT_LENGTH))
        curvatures.append(0.0)
        radius = odds.pick_between(rng, BEND_RADIUS) * (1 if chance(rng, 0.5) else -1)
        bend = min(between(rng, BEND_LENGTH), 1.6 * abs(radius))
        ramp = between(rng, RAMP_LENGTH)
        lengths += [ramp, bend, ramp]
        curvatures += [1 / radius, 1 / radius, 0.0]
    return from_curvature(0.0, 0.0, 0.0, lengths, curvatures)


def through(rng: Rng, axis: Alignment, x: float, y: float) -> Alignment:
    """The axis turned and shifted so that its middle runs through (x, y) in a random direction."""
    middle = axis.at(0.5 * axis.length)
    angle = rng.uniform(0, 2 * math.pi)
    c, s = math.cos(angle), math.sin(angle)
    return Alignment((axis.xy - middle) @ np.array([[c, s], [-s, c]]) + [x, y])


def plan_country(rng: Rng, size: float, style: str) -> Plan:
    """One or more winding roads with side roads."""
    window = box(-PLAN_REACH, -PLAN_REACH, size + PLAN_REACH, size + PLAN_REACH)
    plan = Plan(size, style, land=odds.LAND[style], driveway_every=(30.0, 120.0))
    spots = [0.5 * size + rng.normal(0, 0.12 * size, 2)]
    spots += [rng.uniform(0, size, 2) for _ in range(rng.poisson((size / 260) ** 2))]
    for x, y in spots:
        axis = through(rng, winding(rng, 2.0 * (size + 2 * PLAN_REACH)), x, y)
        plan.roads += [_road(rng, part, "country") for part in _inside(axis, window)]
    for road in list(plan.roads):
        plan.roads += _side_roads(rng, road, window)
    plan.junctions, plan.islands = junctions(rng, plan.roads, window, roundabouts=0.05)
    _curbed_pieces(rng, plan)
    dead_ends(rng, plan, window)
    plan.islands += medians(rng, plan, 0.05)
    place_lots(rng, plan, rough_surface(plan), window, 0.15)
    _tracks(rng, plan)
    return plan


def _inside(axis: Alignment, window: shapely.Polygon) -> list[Alignment]:
    pieces = shapely.get_parts(axis.line.intersection(window))
    return [
        Alignment(shapely.get_coordinates(p)) for p in pieces if isinstance(p, LineString) and p.length > 15
    ]


def _road(rng: Rng, axis: Alignment, rank: str) -> Road:
    width = round(odds.pick_between(rng, WIDTH), 2)
    right, left = (_curb(rng) if chance(rng, CURBED) else flush_edging(rng) for _ in range(2))
    if chance(rng, 0.5):
        left = right
    return Road(axis=axis, width=width, lanes=2 if width > 4.8 else 1, rank=rank, right=right, left=left,
                material=pick(rng, SURFACE), tone=float(np.clip(rng.normal(0, 0.45), -1, 1)), oneway=False,
                marked=width > 5 and chance(rng, 0.75))  # fmt: skip


def _curb(rng: Rng) -> Edging:
    gutter, stone = odds.gutter_and_stone(rng, 0.5, 0.8)
    return Edging(height=round(between(rng, odds.CURB_HEIGHT), 3), gutter=gutter, stone=stone,
                  stone_material=pick(rng, odds.STONE_ODDS), stone_tone=odds.pick_between(rng, odds.STONE_TONE_ODDS),
                  gutter_material=pick(rng, odds.GUTTER_ODDS),
                  footway=rng.uniform(1.0, 2.5) if chance(rng, 0.6) else 0.0,
                  footway_material=pick(rng, odds.FOOTWAY_ODDS))  # fmt: skip


def _side_roads(rng: Rng, road: Road, window: shapely.Polygon) -> list[Road]:
    out: list[Road] = []
    at = rng.uniform(0.2, 1.0) * SIDE_ROAD_EVERY[0]
    while at < road.axis.length - 15:
        turn = (1 if chance(rng, 0.5) else -1) * math.radians(rng.uniform(50, 130))
        x, y = road.axis.at(at)
        length = rng.uniform(25, 60) if chance(rng, 0.25) else 300.0
        straight = rng.uniform(12, 30)
        radius = rng.uniform(40, 300) * (1 if chance(rng, 0.5) else -1)
        axis = from_curvature(float(x), float(y), road.axis.heading(at) + turn,
                              [straight, 15.0, length], [0.0, 0.0, 1 / radius, 1 / radius])  # fmt: skip
        parts = _inside(axis, window)
        if parts and not any(parts[0].line.intersects(r.axis.line) for r in out):
            out.append(_road(rng, parts[0], "country"))
        at += between(rng, SIDE_ROAD_EVERY)
    return out


def _curbed_pieces(rng: Rng, plan: Plan) -> None:
    """Curbs along pieces of roads that are otherwise without: at bends, stops, walls."""
    for k, road in enumerate(plan.roads):
        for side, edging in ((-1, road.right), (1, road.left)):
            for a, b in plan.clear_spans(k, 20.0):
                if edging.kind == "flush" and chance(rng, CURBED_PIECE):
                    s0 = rng.uniform(a, b - 10)
                    s1 = min(b, s0 + rng.uniform(8, 40))
                    if plan.take(k, side, s0, s1):
                        curb = replace(_curb(rng), gutter=0.0)
                        plan.changes.append(Change(k, side, s0, s1, curb, "curbed"))


def _tracks(rng: Rng, plan: Plan) -> None:
    """Unpaved tracks that leave the road; the end of the pavement goes on across them."""
    for road in plan.roads:
        for _ in range(rng.poisson(TRACKS_PER_100_M * road.axis.length / 100)):
            s = rng.uniform(0, road.axis.length)
            side = 1 if chance(rng, 0.5) else -1
            x, y = road.axis.at(s)
            heading = road.axis.heading(s) + side * math.radians(rng.uniform(55, 125))
            radius = rng.uniform(30, 200) * (1 if chance(rng, 0.5) else -1)
            axis = from_curvature(
                float(x), float(y), heading, [10.0, rng.uniform(20, 120)], [0, 0, 1 / radius]
            )
            half = rng.uniform(1.1, 2.0)
            material = pick(rng, {"gravel": 0.45, "soil": 0.35, "sand": 0.1, "dry_grass": 0.1})
            area = axis.strip(0, axis.length, -half, half)
            mouth = shapely.union(
                area, axis.strip(0, road.half + 6, -half - 2, half + 2).buffer(-1).buffer(1)
            )
            plan.under.append(Cover(mouth, material, float(rng.normal(0, 0.3)), rng.uniform(0.1, 0.6)))
