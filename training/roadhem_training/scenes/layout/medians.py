"""Medians and islands: what is taken out of the carriageway between and before junctions."""

from __future__ import annotations

import numpy as np
import shapely
from shapely.geometry import Polygon

from roadhem_training.scenes.layout.odds import between, chance, pick
from roadhem_training.scenes.layout.plan import Edging, Island, Junction, Road

ISLAND_FILL = {"grass": 0.35, "planting": 0.2, "pavers": 0.2, "asphalt": 0.1, "concrete": 0.15}
MEDIAN_WIDTH = (0.5, 3.0)
LEAST_LANE = 2.75  # metres of carriageway that an island leaves on each side


def clear_spans(index: int, road: Road, nodes: list[Junction]) -> list[tuple[float, float]]:
    """Stations (from, to) of the stretches of a road that lie outside its junctions."""
    taken = [(0.0, 0.0), (road.axis.length, road.axis.length)]
    for node in nodes:
        for leg in node.legs:
            if leg.road == index:
                taken.append(tuple(sorted((leg.station, leg.station + leg.sign * leg.reach))))
    taken.sort()
    spans, at = [], 0.0
    for a, b in taken:
        if a - at > 4.0:
            spans.append((at, a))
        at = max(at, b)
    return spans


def medians(rng: np.random.Generator, roads: list[Road], nodes: list[Junction], share: float) -> list[Island]:
    """Medians along wide roads, and short islands before junctions."""
    out = []
    for k, road in enumerate(roads):
        room = road.width - 2 * LEAST_LANE
        if road.oneway or room < MEDIAN_WIDTH[0]:
            continue
        with_median = chance(rng, share * (2.0 if road.rank == "main" else 1.0))
        for a, b in clear_spans(k, road, nodes):
            if with_median and b - a > 16:
                width = min(room, between(rng, MEDIAN_WIDTH))
                out.append(_median(rng, road, a + rng.uniform(1, 5), b - rng.uniform(1, 5), width))
            elif chance(rng, 0.5 * share) and b - a > 14:
                at = a + rng.uniform(3, 5) if chance(rng, 0.5) else b - rng.uniform(8, 12)
                out.append(_median(rng, road, at, at + rng.uniform(3, 8), min(room, rng.uniform(0.8, 2.5))))
    return [i for i in out if i.area.area > 0.8]


def _median(rng: np.random.Generator, road: Road, s0: float, s1: float, width: float) -> Island:
    nose = rng.uniform(0.1, 0.5) * width
    if chance(rng, 0.25):
        taper = min(0.45 * (s1 - s0), rng.uniform(3, 12))

        def half(s: np.ndarray) -> np.ndarray:
            return 0.5 * width * np.clip((s - s0) / taper * 0.85 + 0.15, 0.15, 1.0)

        area = road.axis.strip(s0, s1, lambda s: -half(s), half, step=0.5)
        nose = 0.07 * width
    else:
        area = road.axis.strip(s0, s1, -0.5 * width, 0.5 * width)
    soft = area.buffer(-nose, join_style="mitre").buffer(nose, quad_segs=16)
    edging = Edging(
        kind="raised", height=road.left.height, gutter=road.left.gutter if chance(rng, 0.4) else 0.0,
        gutter_material=road.left.gutter_material, stone=road.left.stone or 0.12, stone_tone=road.left.stone_tone,
    )  # fmt: skip
    fill = pick(rng, ISLAND_FILL)
    return Island(max(shapely.get_parts(soft), key=lambda g: g.area, default=Polygon()), edging, fill)
