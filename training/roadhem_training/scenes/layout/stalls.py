"""Stalls of a car park: rows of them with aisles between, islands at row ends, lines, parked cars."""

from __future__ import annotations

import math

import numpy as np
import shapely
from shapely.geometry import MultiPolygon, Polygon
from shapely.geometry.base import BaseGeometry

from roadhem_training.scenes.layout import odds
from roadhem_training.scenes.layout.odds import between, chance, pick
from roadhem_training.scenes.layout.plan import Edging, Island, Plan
from roadhem_training.scenes.layout.traffic import vehicle
from roadhem_training.scenes.world import Paint

Rng = np.random.Generator

STALL_WIDTH, STALL_LENGTH = (2.3, 2.75), (4.7, 5.5)
AISLE = (5.5, 7.2)
FULL = (0.1, 0.95)
LINE = (0.08, 0.12)
END_ISLANDS, END_WIDTH, SPINE_ISLANDS = 0.55, (1.4, 2.6), 0.35
MARKED = 0.9


class _Look:
    """What all rows of one car park have in common."""

    def __init__(self, rng: Rng, edging: Edging):
        self.deep, self.aisle, self.wide = (between(rng, s) for s in (STALL_LENGTH, AISLE, STALL_WIDTH))
        self.full, self.line = between(rng, FULL), between(rng, LINE)
        self.ended, self.spined = chance(rng, END_ISLANDS), chance(rng, SPINE_ISLANDS)
        self.edging, self.ground = edging.bare(), pick(rng, odds.ISLAND_FILL)


def stalls(
    rng: Rng,
    plan: Plan,
    centre: tuple[float, float],
    heading: float,
    size: tuple[float, float],
    edging: Edging,
    area: BaseGeometry,
) -> None:
    """Fill a lot of `size` (length along `heading`, width) with rows of stalls; lines only within `area`."""
    look, frame = _Look(rng, edging), _Frame(centre, heading)
    rows = _rows(size[1], look.deep, look.aisle)
    room = size[0] - 2 * (look.aisle if len(rows) > 1 else 1.0)
    lines = [line for low, double in rows for line in _row(rng, plan, frame, look, low, double, room)]
    shapely.prepare(area)
    lines = [g for g in lines if area.contains(g)]
    if lines and chance(rng, MARKED):
        plan.paints.append(Paint(MultiPolygon(lines), "white", float(rng.beta(1.5, 3))))


def _row(
    rng: Rng, plan: Plan, frame: _Frame, look: _Look, low: float, double: bool, room: float
) -> list[Polygon]:
    """Add the islands and cars of one row, single or back to back, from `low` upwards; return its lines."""
    high = low + look.deep * (2 if double else 1)
    end = between(rng, END_WIDTH) if look.ended and double else 0.0
    n = int((room - 2 * end) / look.wide)
    if n < 2:
        return []
    x0, x1 = -0.5 * n * look.wide, 0.5 * n * look.wide
    if end:
        for x in (x0 - end, x1):
            plan.islands.append(_end_island(rng, frame, look, (x, x + end), (low, high)))
    if look.spined and double and chance(rng, 0.7):
        middle = low + look.deep
        spine = frame.box(x0 + 0.3, x1 - 0.3, middle - 0.6, middle + 0.6)
        plan.islands.append(Island(spine, look.edging, look.ground, "island"))
    lines = []
    for base in (low, low + look.deep)[: 2 if double else 1]:
        ends = x0 + np.arange(n + 1) * look.wide
        lines += [frame.box(x - look.line / 2, x + look.line / 2, base, base + look.deep) for x in ends]
        for k in np.flatnonzero(rng.random(n) < look.full):
            x, y = rng.normal((x0 + (k + 0.5) * look.wide, base + 0.5 * look.deep), (0.1, 0.2))
            turn = math.pi / 2 if chance(rng, 0.5) else -math.pi / 2
            plan.bodies.append(vehicle(rng, *frame.at(x, y), frame.heading + turn))
    return lines


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
    rng: Rng, frame: _Frame, look: _Look, x: tuple[float, float], y: tuple[float, float]
) -> Island:
    nose = rng.uniform(0.3, 0.48) * (x[1] - x[0] - 0.1)
    area = frame.box(x[0] + 0.05, x[1] - 0.05, y[0] + 0.3, y[1] - 0.3)
    area = area.buffer(-nose, join_style="mitre").buffer(nose, quad_segs=16)
    return Island(area, look.edging, look.ground, "island")


class _Frame:
    """Local axes of a lot."""

    def __init__(self, centre: tuple[float, float], heading: float):
        self.centre, self.heading = np.array(centre), heading
        self.u = np.array([math.cos(heading), math.sin(heading)])
        self.v = np.array([-self.u[1], self.u[0]])

    def at(self, x: float, y: float) -> tuple[float, float]:
        p = self.centre + x * self.u + y * self.v
        return float(p[0]), float(p[1])

    def box(self, x0: float, x1: float, y0: float, y1: float) -> Polygon:
        return Polygon([self.at(x0, y0), self.at(x1, y0), self.at(x1, y1), self.at(x0, y1)])
