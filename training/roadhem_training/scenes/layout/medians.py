"""Medians along wide roads, and short islands before junctions."""

from __future__ import annotations

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry import Polygon

from roadhem_training.scenes.layout import odds
from roadhem_training.scenes.layout.odds import between, chance, pick
from roadhem_training.scenes.layout.plan import Island, Plan, Road

MEDIAN_WIDTH = (0.5, 3.0)
WIDE_MEDIAN = (3.0, 8.0)
LEAST_LANE = 3.0  # metres of carriageway that an island leaves on each side
OPENING = (6.0, 12.0)  # of a median, where one may turn
OPENING_EVERY = (30.0, 80.0)


def median_width(rng: np.random.Generator, width: float) -> float:
    """Width of a median for a road of `width` metres; 0 where it has no room for one."""
    room = width - 2 * LEAST_LANE
    if room < MEDIAN_WIDTH[0]:
        return 0.0
    return min(room, between(rng, WIDE_MEDIAN if room > 7 and chance(rng, 0.6) else MEDIAN_WIDTH))


def medians(rng: np.random.Generator, plan: Plan, short: float) -> list[Island]:
    """The medians of the plan's roads, and on a `short` share of other stretches an island before a junction."""
    out = []
    for k, road in enumerate(plan.roads):
        room = road.width - 2 * LEAST_LANE
        for a, b in plan.clear_spans(k, 14.0):
            if road.median:
                out += _opened(rng, road, a + rng.uniform(1, 5), b - rng.uniform(1, 5), road.median)
            elif room > MEDIAN_WIDTH[0] and not road.oneway and chance(rng, short):
                at = a + rng.uniform(3, 5) if chance(rng, 0.5) else b - rng.uniform(8, 12)
                out.append(_island(rng, road, at, at + rng.uniform(3, 8), min(room, rng.uniform(0.8, 2.5))))
    return [i for i in out if i.area.area > 0.8]


def _opened(rng: np.random.Generator, road: Road, s0: float, s1: float, width: float) -> list[Island]:
    """A median with openings; long enough ones only."""
    out = []
    while s0 < s1 - 5.0:
        end = min(s1, s0 + between(rng, OPENING_EVERY))
        out.append(_island(rng, road, s0, end, width))
        s0 = end + between(rng, OPENING)
    return out


def _island(rng: np.random.Generator, road: Road, s0: float, s1: float, width: float) -> Island:
    nose = rng.uniform(0.1, 0.49) * width
    if chance(rng, 0.3):
        taper = min(0.45 * (s1 - s0), rng.uniform(3, 15))

        def half(s: NDArray[np.float64]) -> NDArray[np.float64]:
            return 0.5 * width * np.clip((s - s0) / taper * 0.75 + 0.25, 0.25, 1.0)

        area = road.axis.strip(s0, s1, lambda s: -half(s), half, step=0.5)
        nose = 0.11 * width
    else:
        area = road.axis.strip(s0, s1, -0.5 * width, 0.5 * width)
    soft = area.buffer(-nose, join_style="mitre").buffer(nose, quad_segs=16)
    largest = max(shapely.get_parts(soft), key=lambda g: g.area, default=Polygon())
    return Island(largest, road.left.bare(), pick(rng, odds.ISLAND_FILL))
