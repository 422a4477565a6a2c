"""Areas to drive on inside blocks: car parks with their stalls and islands, yards and courts."""

from __future__ import annotations

import math

import numpy as np
import shapely
from shapely.geometry import MultiPolygon, Point, Polygon, box
from shapely.geometry.base import BaseGeometry

from roadhem_training.scenes.layout import odds
from roadhem_training.scenes.layout.alignment import Alignment
from roadhem_training.scenes.layout.junctions import closing
from roadhem_training.scenes.layout.odds import between, chance, pick
from roadhem_training.scenes.layout.overlay import joined, less, polygons, shared
from roadhem_training.scenes.layout.plan import Edging, Island, Part, Plan
from roadhem_training.scenes.layout.shapes import oriented_box
from roadhem_training.scenes.layout.traffic import vehicle
from roadhem_training.scenes.world import MARGIN, Paint

Rng = np.random.Generator

STALL_WIDTH, STALL_LENGTH = (2.3, 2.75), (4.7, 5.5)
AISLE = (5.5, 7.2)
MOUTH = (3.5, 8.0)
LONGEST_ACCESS = 40.0
MOUTH_RADIUS = {(0.0, 0.0): 0.1, (0.5, 2.0): 0.35, (2.0, 6.0): 0.55}
LOT_MATERIAL = {"asphalt": 0.68, "concrete": 0.12, "pavers": 0.12, "setts": 0.04, "gravel": 0.04}
FULL = (0.1, 0.95)
LINE = (0.08, 0.12)
END_ISLANDS, SPINE_ISLANDS = 0.55, 0.35


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
        stalls(rng, plan, (centre.x, centre.y), heading, length, width, edging, whole)


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


def stalls(
    rng: Rng, plan: Plan, centre: tuple[float, float], heading: float, length: float, width: float,
    edging: Edging, area: BaseGeometry,
) -> None:  # fmt: skip
    """Rows of stalls along `heading` with aisles between; islands at row ends, lines, parked cars."""
    deep, aisle, wide = between(rng, STALL_LENGTH), between(rng, AISLE), between(rng, STALL_WIDTH)
    rows = _rows(width, deep, aisle)
    frame = _Frame(centre, heading)
    fill, line = between(rng, FULL), between(rng, LINE)
    ended, spined = chance(rng, END_ISLANDS), chance(rng, SPINE_ISLANDS)
    bare, ground = edging.bare(), pick(rng, odds.ISLAND_FILL)
    wear, marked = float(rng.beta(1.5, 3)), chance(rng, 0.9)
    lines: list[Polygon] = []
    for low, double in rows:
        turn = aisle if len(rows) > 1 else 1.0
        reach = length - 2 * turn
        high = low + deep * (2 if double else 1)
        end = rng.uniform(1.4, 2.6) if ended and double else 0.0
        n = int((reach - 2 * end) / wide)
        if n < 2:
            continue
        x0 = -0.5 * n * wide
        if end:
            for x in (x0 - end, x0 + n * wide):
                plan.islands.append(_end_island(rng, frame, x, low, high, end, bare, ground))
        if spined and double and chance(rng, 0.7):
            spine = frame.box(x0 + 0.3, x0 + n * wide - 0.3, low + deep - 0.6, low + deep + 0.6)
            plan.islands.append(Island(spine, bare, ground, "island"))
        for row in range(2 if double else 1):
            base = low + row * deep
            for k in range(n + 1):
                lines.append(frame.box(x0 + k * wide - line / 2, x0 + k * wide + line / 2, base, base + deep))
            for k in np.flatnonzero(rng.random(n) < fill):
                x, y = frame.at(x0 + (k + 0.5) * wide + rng.normal(0, 0.1), base + 0.5 * deep + rng.normal(0, 0.2))
                plan.bodies.append(vehicle(rng, x, y, heading + math.pi / 2 * (1 if chance(rng, 0.5) else -1)))
    shapely.prepare(area)
    lines = [g for g in lines if area.contains(g)]
    if marked and lines:
        plan.paints.append(Paint(MultiPolygon(lines), "white", wear))


def _rows(width: float, deep: float, aisle: float) -> list[tuple[float, bool]]:
    """(lower edge, double?) of the stall rows across a lot of `width` metres, in metres from its middle."""
    out = [(-0.5 * width, False)]
    at = -0.5 * width + deep + aisle
    while at + 3 * deep + aisle <= 0.5 * width + 0.01:
        out.append((at, True))
        at += 2 * deep + aisle
    if at + deep <= 0.5 * width + 0.01:
        out.append((0.5 * width - deep, False))
    return out


def _end_island(
    rng: Rng, frame: _Frame, x: float, low: float, high: float, end: float, edging: Edging, fill: str
) -> Island:
    nose = rng.uniform(0.3, 0.48) * (end - 0.1)
    area = frame.box(x + 0.05, x + end - 0.05, low + 0.3, high - 0.3)
    area = area.buffer(-nose, join_style="mitre").buffer(nose, quad_segs=16)
    return Island(area, edging, fill, "island")


class _Frame:
    """Local axes of a lot."""

    def __init__(self, centre: tuple[float, float], heading: float):
        self.centre = np.array(centre)
        self.u = np.array([math.cos(heading), math.sin(heading)])
        self.v = np.array([-self.u[1], self.u[0]])

    def at(self, x: float, y: float) -> tuple[float, float]:
        p = self.centre + x * self.u + y * self.v
        return float(p[0]), float(p[1])

    def box(self, x0: float, x1: float, y0: float, y1: float) -> Polygon:
        return Polygon([self.at(x0, y0), self.at(x1, y0), self.at(x1, y1), self.at(x0, y1)])
