"""Places where the curb is lowered: driveways and curb ramps. The edge goes on across them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from shapely.geometry import Polygon

from roadhem_training.scenes.layout import odds
from roadhem_training.scenes.layout.odds import Span, between, chance, pick
from roadhem_training.scenes.layout.plan import Edging
from roadhem_training.scenes.layout.stretches import OpenChain, Stretch, cut
from roadhem_training.scenes.world import Cover

DRIVE_MATERIAL = {"asphalt": 0.25, "concrete": 0.3, "pavers": 0.3, "gravel": 0.15}
DRIVE_DEPTH: Span = (4.0, 10.0)
FLARED = 0.45
FLARE: Span = (0.4, 1.5)
FROM_END: Span = (3.0, 9.0)  # metres from a stretch's end to its first driveway
STRAIGHT_ENOUGH = 0.985  # cosine of the turn of the curb over a driveway
RAMP_SHARE = 0.35


def lower(rng: np.random.Generator, stretch: Stretch, every: Span) -> tuple[list[Stretch], list[Cover]]:
    """`stretch` with driveways about `every` metres and curb ramps near its ends; and their paving."""
    if stretch.owner != "road" or stretch.edging.kind != "raised" or stretch.line.length < 8:
        return [stretch], []
    chain = OpenChain(stretch.line)
    low = replace(stretch.edging, kind="lowered", height=round(between(rng, odds.LOWERED_HEIGHT), 3))
    material, covers, places = pick(rng, DRIVE_MATERIAL), [], []
    at = 0.0
    if stretch.edging.footway and chance(rng, RAMP_SHARE):
        width = between(rng, odds.RAMP)
        at = rng.uniform(0.5, 3.0) + width
        places.append((at - width, at, low))
    at += between(rng, FROM_END)
    while True:
        width = between(rng, odds.DRIVEWAY)
        if at + width > chain.length - FROM_END[0]:
            break
        if chain.frame(at)[1] @ chain.frame(at + width)[1] < STRAIGHT_ENOUGH:
            at += 1.0
            continue
        places.append((at, at + width, _gutterless(low) if chance(rng, 0.3) else low))
        covers.append(_paving(rng, chain, at, at + width, stretch.edging, material))
        at += width + between(rng, every)
    return cut(stretch, places), covers


def _gutterless(edging: Edging) -> Edging:
    return replace(edging, gutter=0.0)


def _paving(rng: np.random.Generator, chain: OpenChain, a: float, b: float, edging: Edging, material: str) -> Cover:
    flare = between(rng, FLARE) if chance(rng, FLARED) else 0.0
    depth = edging.stone + edging.verge + edging.footway + between(rng, DRIVE_DEPTH)
    d = chain.frame(0.5 * (a + b))[1]
    out = np.array([d[1], -d[0]])
    p = chain.points(np.array([a, b]))
    throat = [p[1] - flare * d + max(flare, 0.3) * out, p[0] + flare * d + max(flare, 0.3) * out]
    back = [throat[0] + depth * out, throat[1] + depth * out]
    area = Polygon([p[0], p[1], throat[0], back[0], back[1], throat[1]])
    return Cover(area.buffer(0), material, float(rng.normal(0, 0.3)), relief=edging.height)
