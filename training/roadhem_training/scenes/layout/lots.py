"""Areas to drive on inside blocks: car parks, yards and courts, each with a mouth to a road."""

from __future__ import annotations

import math

import numpy as np
import shapely
from shapely.geometry import Point, Polygon, box
from shapely.geometry.base import BaseGeometry

from roadhem_training.scenes.layout import odds
from roadhem_training.scenes.layout.alignment import Alignment
from roadhem_training.scenes.layout.junctions import closing
from roadhem_training.scenes.layout.odds import between, chance, pick
from roadhem_training.scenes.layout.overlay import joined, less, polygons, shared
from roadhem_training.scenes.layout.plan import Edging, Part, Plan
from roadhem_training.scenes.layout.shapes import oriented_box
from roadhem_training.scenes.layout.stalls import stalls
from roadhem_training.scenes.world import MARGIN

Rng = np.random.Generator

MOUTH = (3.5, 8.0)
LONGEST_ACCESS = 40.0
MOUTH_RADIUS = {(0.0, 0.0): 0.1, (0.5, 2.0): 0.35, (2.0, 6.0): 0.55}
LOT_MATERIAL = {"asphalt": 0.68, "concrete": 0.12, "pavers": 0.12, "setts": 0.04, "gravel": 0.04}


def lot_edging(rng: Rng) -> Edging:
    """How a lot ends: a curb with a gutter or none, or flush."""
    if chance(rng, 0.25):
        ground = pick(rng, {"grass": 0.5, "soil": 0.2, "gravel": 0.3})
        return Edging("flush", 0.0, verge=rng.uniform(0.3, 1.2), verge_material=ground)
    gutter, stone = odds.gutter_and_stone(rng, 0.3, 0.8)
    return Edging(height=round(between(rng, odds.CURB_HEIGHT), 3), gutter=gutter, stone=stone,
                  stone_material=pick(rng, odds.STONE_ODDS), stone_tone=odds.pick_between(rng, odds.STONE_TONE_ODDS),
                  gutter_material=pick(rng, odds.GUTTER_ODDS),
                  footway=rng.uniform(1.2, 2.2) if chance(rng, 0.25) else 0.0,
                  footway_material=pick(rng, odds.FOOTWAY_ODDS))  # fmt: skip


def place_lots(rng: Rng, plan: Plan, surface: BaseGeometry, window: Polygon, share: float) -> None:
    """Put a car park, yard or court with a mouth into a `share` of the blocks between the roads."""
    seen = box(-MARGIN, -MARGIN, plan.size + MARGIN, plan.size + MARGIN)
    for face in less(window, surface).geoms:
        if face.area < 350 or not chance(rng, share) or not seen.intersects(face):
            continue
        room = face.buffer(-rng.uniform(3.5, 7.0))
        best = max(polygons(room), key=lambda p: p.area, default=Polygon())
        if best.area > 120:
            _place(rng, plan, surface, face, best)


def _place(rng: Rng, plan: Plan, surface: BaseGeometry, face: Polygon, room: Polygon) -> None:
    heading = _long_side(room)
    lot = _fitted(rng, room, heading)
    if lot is None:
        return
    area, length, width = lot
    edging = lot_edging(rng)
    material, tone = pick(rng, LOT_MATERIAL), float(np.clip(rng.normal(0.1, 0.4), -1, 1))
    if chance(rng, 0.6):
        area = area.buffer(-1.0, join_style="mitre").buffer(1.0, quad_segs=16)
    mouths = (_mouth(rng, area, surface, face, heading) for _ in range(6))
    found = [m for m in mouths if m][: 2 if chance(rng, 0.35) else 1]
    if not found:
        return
    whole = joined([area, *(g for m in found for g in m)])
    for piece in whole.geoms:
        plan.parts.append(Part(piece, edging, material, tone, "lot"))
    if min(length, width) > 14 and chance(rng, 0.85):
        centre = area.centroid
        stalls(rng, plan, (centre.x, centre.y), heading, (length, width), edging, whole)


def _long_side(area: Polygon) -> float:
    c = shapely.get_coordinates(area.minimum_rotated_rectangle)
    u = max((c[1] - c[0], c[2] - c[1]), key=lambda e: float(np.hypot(*e)))
    return math.atan2(u[1], u[0])


def _fitted(rng: Rng, room: Polygon, heading: float) -> tuple[Polygon, float, float] | None:
    """A rectangle inside `room`: (area, length, width)."""
    spot = shapely.maximum_inscribed_circle(room, tolerance=0.5)
    radius = spot.length
    x, y = shapely.get_coordinates(spot)[0]
    if radius < 4.5:
        return None
    for stretch in np.sort(rng.uniform(1.0, 3.0, 8))[::-1]:
        width = radius * 2 * rng.uniform(0.5, 0.98)
        area = oriented_box(x, y, width * stretch, width, heading)
        if room.contains(area):
            return area, width * stretch, width
    side = 1.3 * radius
    return oriented_box(x, y, side, side, heading), side, side


def _mouth(
    rng: Rng, lot: Polygon, surface: BaseGeometry, face: Polygon, heading: float
) -> list[Polygon] | None:
    """A straight access from `lot` to the road across the face, with its rounded corners."""
    width = between(rng, MOUTH)
    side = heading + 0.5 * math.pi * int(rng.integers(4))
    across = np.array([math.cos(side), math.sin(side)])
    x, y = shapely.get_coordinates(lot.centroid)[0]
    shift = rng.uniform(-0.3, 0.3) * math.sqrt(lot.area)
    start = np.array([x, y]) + shift * np.array([-across[1], across[0]])
    ray = shapely.LineString([start, start + 200 * across])
    hit = ray.intersection(surface)
    if hit.is_empty:
        return None
    reach = Point(start).distance(hit)
    if not 0 < reach - Point(start).distance(lot.exterior) < LONGEST_ACCESS:
        return None
    end = start + (reach + 1.5) * across
    lane = Alignment(np.array([start, end])).strip(0, reach + 1.5, -width / 2, width / 2)
    near = shared(surface, Point(start + reach * across).buffer(width + 14))
    if less(less(lane, face), near).area > 1e-3:
        return None
    radius = odds.pick_between(rng, MOUTH_RADIUS)
    out = [lane]
    if radius > 0.1:
        ground = joined([near, lane])
        disc = Point(start + reach * across).buffer(width / 2 + 2 * radius + 1)
        out += [p for p in closing(ground, radius) if disc.contains(p)]
    return out
