"""Small things along streets: lamp posts, signs, bins, shelters, guard rails."""

from __future__ import annotations

import math

import numpy as np
import shapely
from shapely.geometry import LineString, Point

from roadhem_training.scenes.layout.odds import chance, pick
from roadhem_training.scenes.layout.overlay import polygons
from roadhem_training.scenes.layout.shapes import oriented_box
from roadhem_training.scenes.layout.stretches import OpenChain, Stretch
from roadhem_training.scenes.world import Body, OtherLine

LAMPS, LAMP_EVERY, LAMP_HEIGHT = 0.35, (18.0, 35.0), (4.0, 9.0)
BOLLARDS, BOLLARD_EVERY = 0.06, (1.2, 2.5)
BINS, SHELTER = 0.15, 0.04
BARRIERS = {"none": 0.87, "rail": 0.05, "wall": 0.05, "hedge": 0.03}
THICKNESS = {"rail": 0.12, "wall": 0.3, "hedge": 0.8}
TOP = {"rail": (0.7, 1.1), "wall": (0.4, 2.2), "hedge": (0.6, 1.8)}
BEHIND = (0.35, 0.7)  # metres from the edge to a post


def along(rng: np.random.Generator, stretch: Stretch) -> tuple[list[Body], list[OtherLine]]:
    """What stands beside one stretch of edge, and the lines it makes."""
    if stretch.line.length < 8 or stretch.edging.kind == "lowered":
        return [], []
    chain, back = OpenChain(stretch.line), stretch.edging.stone + rng.uniform(*BEHIND)
    out: list[Body] = []
    if chance(rng, LAMPS):
        out += _row(rng, chain, back, rng.uniform(*LAMP_EVERY), "pole", 0.09, rng.uniform(*LAMP_HEIGHT))
    if stretch.edging.footway and chance(rng, BOLLARDS):
        out += _row(rng, chain, back, rng.uniform(*BOLLARD_EVERY), "post", 0.07, 0.9)
    if stretch.edging.footway and chance(rng, BINS):
        for _ in range(int(rng.integers(1, 5))):
            x, y, heading = _behind(chain, rng.uniform(0, chain.length), back + rng.uniform(0, 1.5))
            out.append(Body(oriented_box(x, y, 0.6, 0.6, heading), 1.1, "bin", 0.0, rng.random()))
    if stretch.edging.footway > 1.8 and stretch.line.length > 20 and chance(rng, SHELTER):
        x, y, heading = _behind(chain, 0.5 * chain.length, stretch.edging.stone + stretch.edging.verge + 1.4)
        out.append(
            Body(oriented_box(x, y, rng.uniform(3, 5), 1.5, heading), 2.4, "shelter", 2.2, rng.random())
        )
    barrier = pick(rng, BARRIERS)
    if barrier == "none":
        return out, []
    bodies, lines = _barrier(rng, chain, back + 0.5 * THICKNESS[barrier], barrier)
    return out + bodies, lines


def _barrier(
    rng: np.random.Generator, chain: OpenChain, back: float, what: str
) -> tuple[list[Body], list[OtherLine]]:
    """A guard rail, wall or hedge close behind the edge."""
    a, b = np.sort(rng.uniform(0, chain.length, 2))
    line = chain.piece(a, b).offset_curve(-back) if b - a > 5 else LineString()
    area = line.buffer(0.5 * THICKNESS[what], cap_style="flat", join_style="mitre")
    bodies = [Body(p, rng.uniform(*TOP[what]), what, 0.0, rng.random()) for p in polygons(area)]
    name = "hedge" if what == "hedge" else "wall"
    return bodies, [
        OtherLine(g, name) for g in shapely.get_parts(line) if isinstance(g, LineString) and bodies
    ]


def _behind(chain: OpenChain, s: float, back: float) -> tuple[float, float, float]:
    (x, y), d = chain.frame(s)
    return float(x + d[1] * back), float(y - d[0] * back), math.atan2(d[1], d[0])


def _row(
    rng: np.random.Generator,
    chain: OpenChain,
    back: float,
    every: float,
    what: str,
    radius: float,
    top: float,
) -> list[Body]:
    out = []
    for s in np.arange(rng.uniform(0, every), chain.length, every):
        x, y, _ = _behind(chain, s, back)
        out.append(Body(Point(x, y).buffer(radius, quad_segs=3), top, what, 0.0, rng.random()))
    return out
