"""Road markings with handbook sizes.

Normal lines 0.10–0.15 m, broken lines 3.05 m with gaps of 9.14 m, crosswalk lines 0.15–0.60 m [read: MUTCD 2003 and
secondary pages]; stop lines 0.30–0.61 m wide [memory]; European broken lines 3 + 6 m [memory].
"""

from __future__ import annotations

import numpy as np
import shapely
from shapely.geometry import LineString, MultiPolygon, Polygon

from roadhem_training.scenes.layout.medians import clear_spans
from roadhem_training.scenes.layout.odds import between, chance, pick
from roadhem_training.scenes.layout.plan import Leg, Plan, Road
from roadhem_training.scenes.layout.surface import polygons
from roadhem_training.scenes.world import OtherLine, Paint

LINE_WIDTH = (0.10, 0.15)
STOP_WIDTH = (0.30, 0.61)
DASHES = {(3.05, 9.14): 0.35, (3.0, 6.0): 0.45, (6.0, 12.0): 0.2}
CROSSWALK_DEPTH = (2.5, 4.5)
BAR_WIDTH, BAR_GAP = (0.30, 0.60), (0.40, 0.70)
CENTRE_SOLID = 0.25
STOP_LINE = 0.45
CROSSWALK = 0.35
YELLOW = 0.25


def paint(rng: np.random.Generator, plan: Plan, surface: MultiPolygon) -> tuple[list[Paint], list[OtherLine]]:
    """All markings of the plan, and the lines they make that could be taken for an edge."""
    colour = "yellow" if chance(rng, YELLOW) else "white"
    paints, lines = [], []
    for k, road in enumerate(plan.roads):
        if not road.marked:
            continue
        wear = float(np.clip(rng.beta(1.5, 2.5), 0, 1))
        dash, width = pick(rng, DASHES), between(rng, LINE_WIDTH)
        for a, b in clear_spans(k, road, plan.junctions):
            for offset, solid, tint in _lane_lines(rng, road, colour):
                for area in _line(road, a, b, offset, width, None if solid else dash):
                    paints.append(Paint(area, tint, wear))
                lines.append(OtherLine(LineString(road.axis.parallel(a, b, offset)), "marking"))
    for node in plan.junctions:
        for leg in node.legs:
            paints += _at_leg(rng, plan.roads[leg.road], leg)
    return _on(surface, paints), [line for line in lines if line.line.length > 2]


def _lane_lines(rng: np.random.Generator, road: Road, colour: str) -> list[tuple[float, bool, str]]:
    """(offset, solid, colour) of the lines between lanes."""
    lane = road.width / road.lanes
    out = []
    for k in range(1, road.lanes):
        centre = not road.oneway and 2 * k == road.lanes
        out.append((k * lane - road.half, centre and chance(rng, CENTRE_SOLID), colour if centre else "white"))
    return out


def _line(
    road: Road, a: float, b: float, offset: float, width: float, dash: tuple[float, float] | None
) -> list[Polygon]:
    lo, hi = offset - 0.5 * width, offset + 0.5 * width
    if dash is None:
        return [road.axis.strip(a, b, lo, hi)]
    starts = np.arange(a, b - dash[0], sum(dash))
    return [road.axis.strip(s, s + dash[0], lo, hi) for s in starts]


def _at_leg(rng: np.random.Generator, road: Road, leg: Leg) -> list[Paint]:
    if not road.marked or road.lanes < 2:
        return []
    at, wear = leg.reach + rng.uniform(0.2, 1.5), float(rng.beta(1.5, 2.5))
    out = []
    if chance(rng, CROSSWALK):
        depth, bar, gap = between(rng, CROSSWALK_DEPTH), between(rng, BAR_WIDTH), between(rng, BAR_GAP)
        for d in np.arange(-road.half + 0.4, road.half - 0.4 - bar, bar + gap):
            out.append(Paint(_across(road, leg, at, at + depth, d, d + bar), "white", wear))
        at += depth + 1.2
    if chance(rng, STOP_LINE):
        width = between(rng, STOP_WIDTH)
        inner, outer = (0.0, road.half - 0.2) if leg.sign > 0 else (-road.half + 0.2, 0.0)
        if road.oneway:
            inner, outer = -road.half + 0.2, road.half - 0.2
        out.append(Paint(_across(road, leg, at, at + width, inner, outer), "white", wear))
    return [p for p in out if not p.area.is_empty]


def _across(road: Road, leg: Leg, near: float, far: float, lo: float, hi: float) -> Polygon:
    s = sorted((leg.station + leg.sign * near, leg.station + leg.sign * far))
    if s[0] < 0 or s[1] > road.axis.length:
        return Polygon()
    return road.axis.strip(s[0], s[1], lo, hi)


def _on(surface: MultiPolygon, paints: list[Paint]) -> list[Paint]:
    shapely.prepare(surface)
    out = []
    for p in paints:
        if surface.contains(p.area):
            out.append(p)
        elif surface.intersects(p.area):
            out += [Paint(g, p.colour, p.wear) for g in polygons(surface.intersection(p.area))]
    return out
