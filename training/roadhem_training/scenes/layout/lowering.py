"""Where the edge changes along a stretch: what was planned, and driveways. The edge goes on across them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import shapely
from shapely.geometry import MultiPolygon, Polygon

from roadhem_training.scenes.layout import odds
from roadhem_training.scenes.layout.odds import Span, between, chance, pick
from roadhem_training.scenes.layout.overlay import less
from roadhem_training.scenes.layout.plan import Change, Edging, Plan
from roadhem_training.scenes.layout.stretches import OpenChain, Stretch, cut
from roadhem_training.scenes.world import Cover

DRIVE_MATERIAL = {"asphalt": 0.25, "concrete": 0.28, "pavers": 0.3, "slabs": 0.05, "gravel": 0.12}
DRIVE_DEPTH: Span = (3.0, 9.0)
FLARED, FLARE = 0.45, (0.4, 1.5)
GUTTERLESS = 0.35  # share of driveways at whose mouth the gutter stops
THROUGH = 0.3  # share of driveways whose paving runs through the footway
NO_DRIVEWAYS = ("motorway", "ramp")
FROM_END = 3.0  # metres from a stretch's end to its first driveway
STRAIGHT_ENOUGH = 0.985  # cosine of the turn of the curb over a driveway
OFF_LINE = 0.15  # metres a planned change may lie off the stretch it belongs to
Place = tuple[float, float, Edging]


def change(
    rng: np.random.Generator, plan: Plan, stretch: Stretch, changes: list[Change]
) -> tuple[list[Stretch], list[Cover]]:
    """`stretch` cut where its edging changes, and the paving of its driveways.

    `changes` are those of the plan on the stretch's side of its road.
    """
    if stretch.owner not in ("road", "head") or stretch.line.length < 4:
        return [stretch], []
    chain = OpenChain(stretch.line)
    places = sorted(_planned(plan, stretch, changes), key=lambda p: p[0])
    places = [p for k, p in enumerate(places) if k == 0 or p[0] > places[k - 1][1]]
    drives: list[Place] = []
    beside: list[Place] = []
    fast = stretch.road >= 0 and plan.roads[stretch.road].rank in NO_DRIVEWAYS
    if stretch.edging.kind == "raised" and stretch.line.length > 8 and not fast:
        drives = _driveways(rng, chain, stretch.edging, places, plan.driveway_every)
    elif stretch.edging.kind == "flush" and stretch.line.length > 8 and not fast:
        beside = _driveways(rng, chain, stretch.edging, places, plan.driveway_every)
    material, tone = pick(rng, DRIVE_MATERIAL), float(rng.normal(0, 0.3))
    covers = [
        c for a, b, _ in drives + beside for c in _paving(rng, chain, a, b, stretch.edging, material, tone)
    ]
    return cut(stretch, sorted(places + drives, key=lambda p: p[0])), covers


def _planned(plan: Plan, stretch: Stretch, changes: list[Change]) -> list[Place]:
    if not changes:
        return []
    road = plan.roads[stretch.road]
    s = np.array([[c.s0, c.s1] for c in changes])
    points = shapely.points(road.axis.at(s, np.array([[c.side * road.half] for c in changes])))
    off = shapely.distance(stretch.line, points)
    at = shapely.line_locate_point(stretch.line, points)
    out = []
    for c, d, (a, b) in zip(changes, off, np.sort(at, axis=1), strict=True):
        if d.max() < OFF_LINE and b - a > 0.5:
            out.append((float(a), float(b), c.edging))
    return out


def _driveways(
    rng: np.random.Generator, chain: OpenChain, edging: Edging, places: list[Place], every: Span
) -> list[Place]:
    low = replace(edging, kind="lowered", height=round(between(rng, odds.LOWERED_HEIGHT), 3))
    out: list[Place] = []
    at = FROM_END + rng.uniform(0, 0.7) * every[0]
    while True:
        width = between(rng, odds.DRIVEWAY)
        if at + width > chain.length - FROM_END:
            return out
        blocked = any(at - 1 < b and a < at + width + 1 for a, b, _ in places)
        if blocked or chain.frame(at)[1] @ chain.frame(at + width)[1] < STRAIGHT_ENOUGH:
            at += 1.0
            continue
        mouth = replace(low, gutter=0.0) if chance(rng, GUTTERLESS) else low
        out.append((at, at + width, mouth))
        at += width + between(rng, every)


def _paving(
    rng: np.random.Generator, chain: OpenChain, a: float, b: float, edging: Edging, material: str, tone: float
) -> list[Cover]:
    """The drive, with flares at the curb or without; at times only behind the footway, which runs through."""
    flare = between(rng, FLARE) if chance(rng, FLARED) else 0.0
    depth = edging.depth + between(rng, DRIVE_DEPTH)
    d = chain.frame(0.5 * (a + b))[1]
    out = np.array([d[1], -d[0]])
    p, q = chain.points(np.array([a, b]))
    throat = max(flare, 0.3)
    inner = [q - flare * d + throat * out, p + flare * d + throat * out]
    area: Polygon | MultiPolygon = Polygon(
        [p, q, inner[0], inner[0] + depth * out, inner[1] + depth * out, inner[1]]
    )
    area = area.buffer(0)
    if edging.footway and not chance(rng, THROUGH):
        near = edging.stone + edging.verge
        walk = Polygon([p - 9 * d + near * out, q + 9 * d + near * out,
                        q + 9 * d + edging.depth * out, p - 9 * d + edging.depth * out])  # fmt: skip
        area = less(area, walk)
    return [Cover(area, material, tone, relief=edging.height, direction=float(np.arctan2(d[1], d[0])))]
