"""Land without any road: fields, gardens, roofs, courts, water, rails; only lines that mislead."""

from __future__ import annotations

import math

import numpy as np
import shapely
from shapely.geometry import LineString, Polygon, box
from shapely.ops import split

from roadhem_training.scenes.layout import odds
from roadhem_training.scenes.layout.odds import chance, pick
from roadhem_training.scenes.layout.overlay import polygons
from roadhem_training.scenes.layout.plan import Plan
from roadhem_training.scenes.layout.shapes import oriented_box
from roadhem_training.scenes.world import MARGIN, Body, Cover, OtherLine

Rng = np.random.Generator

CUTS_PER_100_M = 2.5
RAILWAY, WATER, PITCH = 0.2, 0.2, 0.35
GAUGE, TRACK_BED = 1.435, 4.2
PITCH_GROUND = {"mown": 0.4, "rubber": 0.3, "sand": 0.15, "asphalt": 0.15}


def plan_open_land(rng: Rng, size: float, style: str) -> Plan:
    """Parcels of land, at times with a railway, water or a sports ground."""
    plan = Plan(size, style, land=odds.LAND[style])
    frame = box(-MARGIN, -MARGIN, size + MARGIN, size + MARGIN)
    plan.parcels = _parcels(rng, frame, size)
    if chance(rng, RAILWAY):
        _railway(rng, plan, frame)
    if chance(rng, WATER):
        _water(rng, plan, frame)
    for _ in range(rng.poisson(PITCH * (size / 100) ** 2)):
        _pitch(rng, plan, *rng.uniform(0, size, 2))
    return plan


def _parcels(rng: Rng, frame: Polygon, size: float) -> list[Polygon]:
    pieces = [frame]
    heading = rng.uniform(0, math.pi)
    for _ in range(2 + rng.poisson(CUTS_PER_100_M * size / 100)):
        k = int(np.argmax([p.area for p in pieces]))
        middle = shapely.get_coordinates(pieces[k].centroid)[0] + rng.normal(0, 0.05 * size, 2)
        angle = heading + rng.normal(0, 0.1) + (math.pi / 2 if chance(rng, 0.5) else 0.0)
        d = 3 * (size + 2 * MARGIN) * np.array([math.cos(angle), math.sin(angle)])
        pieces += polygons(split(pieces.pop(k), LineString([middle - d, middle + d])))
    return [p for p in pieces if p.area > 1.0]


def _chord(rng: Rng, size: float) -> LineString:
    x, y = rng.uniform(0.2 * size, 0.8 * size, 2)
    angle = rng.uniform(0, math.pi)
    d = 2 * (size + 4 * MARGIN) * np.array([math.cos(angle), math.sin(angle)])
    t = np.linspace(-1, 1, 60)[:, None]
    bend = rng.normal(0, 0.1) * size * t**2
    return LineString([x, y] + t * d + bend * np.array([-d[1], d[0]]) / np.hypot(*d))


def _railway(rng: Rng, plan: Plan, frame: Polygon) -> None:
    """Ballast with one to three tracks of two rails each."""
    line, tracks = _chord(rng, plan.size), int(rng.integers(1, 4))
    bed = line.buffer(0.5 * TRACK_BED * tracks, cap_style="flat").intersection(frame)
    plan.covers += [Cover(p, "ballast", float(rng.normal(0, 0.3))) for p in polygons(bed)]
    for k in range(tracks):
        middle = (k - 0.5 * (tracks - 1)) * TRACK_BED
        for d in (middle - 0.5 * GAUGE, middle + 0.5 * GAUGE):
            rail = line.offset_curve(d).intersection(frame)
            plan.covers.append(Cover(rail.buffer(0.06, cap_style="flat"), "metal", 0.3))
            plan.lines += [OtherLine(g, "rail") for g in shapely.get_parts(rail) if isinstance(g, LineString)]


def _water(rng: Rng, plan: Plan, frame: Polygon) -> None:
    """A stream or canal between banks or walls."""
    line, half = _chord(rng, plan.size), rng.uniform(1.5, 12)
    area = line.buffer(half, cap_style="flat").intersection(frame)
    plan.covers += [Cover(p, "water", 0.0, pick(rng, {0.0: 0.5, 0.5: 0.5}), -0.5) for p in polygons(area)]
    if chance(rng, 0.4):
        for d in (-half, half):
            bank = line.offset_curve(d).intersection(frame)
            plan.bodies += [Body(p, 0.5, "wall") for p in polygons(bank.buffer(0.2, cap_style="flat"))]
            plan.lines += [OtherLine(g, "wall") for g in shapely.get_parts(bank) if isinstance(g, LineString)]


def _pitch(rng: Rng, plan: Plan, x: float, y: float) -> None:
    """A sports ground: bright lines on even ground."""
    length, width, heading = rng.uniform(18, 60), rng.uniform(10, 35), rng.uniform(0, math.pi)
    ground = oriented_box(x, y, length + 4, width + 4, heading)
    plan.covers.append(Cover(ground, pick(rng, PITCH_GROUND), float(rng.normal(0, 0.2)), direction=heading))
    for shape in (oriented_box(x, y, length, width, heading), oriented_box(x, y, 0.1, width, heading)):
        line = LineString(shape.exterior)
        plan.covers.append(Cover(line.buffer(0.05), "snow", 0.0))
        plan.lines.append(OtherLine(line, "marking"))
    plan.lines.append(OtherLine(LineString(ground.exterior), "footway"))
