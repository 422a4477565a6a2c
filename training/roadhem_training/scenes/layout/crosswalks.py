"""Where people cross: before junctions and between them, with curb ramps on both sides."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from roadhem_training.scenes.layout import odds
from roadhem_training.scenes.layout.odds import between, chance
from roadhem_training.scenes.layout.plan import Change, Crosswalk, Leg, Plan

DEPTH = (2.5, 4.5)
AT_LEG, MARKED, BETWEEN = 0.4, 0.75, 0.12
RAMPED = 0.85


def crosswalks(rng: np.random.Generator, plan: Plan) -> None:
    """Add crosswalks and their ramps to streets that have a footway."""
    for node in plan.junctions:
        for leg in node.legs:
            if chance(rng, AT_LEG):
                _at_leg(rng, plan, leg)
    for k in range(len(plan.roads)):
        for a, b in plan.clear_spans(k, 30.0):
            if chance(rng, BETWEEN):
                s0 = rng.uniform(a + 8, b - 12)
                _add(rng, plan, k, s0, s0 + between(rng, DEPTH))


def _at_leg(rng: np.random.Generator, plan: Plan, leg: Leg) -> None:
    near = leg.station + leg.sign * (leg.reach + rng.uniform(0.2, 1.5))
    far = near + leg.sign * between(rng, DEPTH)
    s0, s1 = sorted((near, far))
    if any(a - 0.1 <= s0 and s1 <= b for a, b in plan.clear_spans(leg.road)):
        _add(rng, plan, leg.road, s0, s1)


def _add(rng: np.random.Generator, plan: Plan, k: int, s0: float, s1: float) -> None:
    road = plan.roads[k]
    if not (road.right.footway and road.left.footway) or road.width < 4.5:
        return
    free = [side for side in (-1, 1) if plan.take(k, side, s0 - 0.3, s1 + 0.3)]
    plan.crosswalks.append(Crosswalk(k, s0, s1, road.marked and chance(rng, MARKED)))
    ramped = chance(rng, RAMPED)
    width = min(between(rng, odds.RAMP), s1 - s0)
    for side in free:
        edging = road.left if side > 0 else road.right
        if ramped and edging.kind == "raised":
            low = replace(edging, kind="lowered", height=round(between(rng, odds.LOWERED_HEIGHT), 3))
            middle = 0.5 * (s0 + s1) + rng.normal(0, 0.1)
            plan.changes.append(Change(k, side, middle - width / 2, middle + width / 2, low, "ramp"))
