"""Street networks of towns: splitting land into blocks, bending it, and giving each street its cross-section."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry import LineString, Polygon, box
from shapely.ops import split

from roadhem_training.scenes.layout import odds
from roadhem_training.scenes.layout.alignment import Alignment
from roadhem_training.scenes.layout.annexes import bays, dead_ends
from roadhem_training.scenes.layout.crosswalks import crosswalks
from roadhem_training.scenes.layout.junctions import junctions
from roadhem_training.scenes.layout.lots import place_lots
from roadhem_training.scenes.layout.medians import median_width, medians
from roadhem_training.scenes.layout.odds import StreetOdds, between, chance, pick, pick_between
from roadhem_training.scenes.layout.plan import Edging, Plan, Road
from roadhem_training.scenes.layout.surface import PLAN_REACH, rough_surface

Rng = np.random.Generator
SMALL_FRAME = 70.0  # metres; smaller frames stay near junctions, so that they show edges
Axis = tuple[LineString, str]


def street_axes(rng: Rng, size: float, reach: float, rules: StreetOdds) -> list[Axis]:
    """Axes with their rank ("main", "street", "alley") that cover a frame of `size` metres and `reach` beyond it."""
    extent = max(size + 2 * reach, 2.6 * rules.block[1])
    land = shapely.affinity.rotate(box(-extent, -extent, extent, extent), rng.uniform(0, 90), origin=(0, 0))
    axes: list[Axis] = []
    _divide(rng, land, 0, rules, axes)
    if chance(rng, rules.warp):
        bend = _bend(rng)
        axes = [(_apply(bend, line), rank) for line, rank in axes]
    x, y = (_open_spot if rules.in_block and size > SMALL_FRAME else _focus)(rng, axes, extent, size)
    axes = [(shapely.affinity.translate(line, 0.5 * size - x, 0.5 * size - y), rank) for line, rank in axes]
    window = box(-reach, -reach, size + reach, size + reach)
    return [(line, rank) for line, rank in axes if line.intersects(window)]


def _divide(rng: Rng, land: Polygon, depth: int, rules: StreetOdds, axes: list[Axis]) -> None:
    corners = shapely.get_coordinates(land.minimum_rotated_rectangle)[:3]
    u, v = corners[1] - corners[0], corners[2] - corners[1]
    lu, lv = float(np.hypot(*u)), float(np.hypot(*v))
    if lu < lv:
        u, v, lu, lv = v, u, lv, lu
    if lu < between(rng, rules.block) * 1.75:
        _close(rng, land, rules, axes)
        return
    middle = np.array(land.centroid.coords[0]) + (u / lu) * lu * rng.uniform(-0.14, 0.14)
    main = 0.55 if lu > 5 * rules.block[1] or depth < 1 else 0.06
    rank = "main" if chance(rng, main) else pick(rng, {"street": 0.8, "alley": 0.2})
    cuts = [_cut(land, middle, math.atan2(v[1], v[0]) + rng.normal(0, rules.skew))]
    if lv > rules.block[0] * 1.7 and chance(rng, rules.crossing):
        cuts.append(_cut(land, middle, math.atan2(u[1], u[0]) + rng.normal(0, rules.skew)))
    pieces = [land]
    for cut in cuts:
        axes.append((cut, rank))
        pieces = [q for p in pieces for q in split(p, shapely.affinity.scale(cut, 1.01, 1.01)).geoms]
        rank = "street"
    for piece in pieces:
        _divide(rng, piece, depth + 1, rules, axes)


def _close(rng: Rng, land: Polygon, rules: StreetOdds, axes: list[Axis]) -> None:
    """At times a dead end into an undivided block, from the middle of its longest side."""
    if not chance(rng, rules.closes):
        return
    xy = shapely.get_coordinates(land.exterior)
    k = int(np.argmax(np.hypot(*np.diff(xy, axis=0).T)))
    start = xy[k] + rng.uniform(0.35, 0.65) * (xy[k + 1] - xy[k])
    goal = shapely.get_coordinates(land.centroid)[0] + rng.normal(0, 2.0, 2)
    end = start + rng.uniform(0.9, 1.25) * (goal - start)
    if np.hypot(*(end - start)) > 14:
        axes.append((LineString([start, end]), "close"))


def _cut(land: Polygon, at: NDArray[np.float64], angle: float) -> LineString:
    d = 4.0 * math.sqrt(land.area) * np.array([math.cos(angle), math.sin(angle)])
    line = LineString([at - d, at + d]).intersection(land)
    return line if isinstance(line, LineString) else max(line.geoms, key=lambda g: g.length)


def _bend(rng: Rng) -> Callable[[NDArray[np.float64]], NDArray[np.float64]]:
    """A smooth map of the plane; bends have radii of tens to hundreds of metres."""
    waves = []
    for _ in range(3):
        length, angle = rng.uniform(90, 320), rng.uniform(0, 2 * math.pi)
        strength = rng.uniform(0.1, 1.0) * (length / (2 * math.pi)) ** 2 / rng.uniform(40, 200)
        waves.append((length, angle, rng.uniform(0, 2 * math.pi), min(strength, 0.055 * length)))

    def bend(xy: NDArray[np.float64]) -> NDArray[np.float64]:
        out = xy.copy()
        for length, angle, phase, strength in waves:
            along = xy @ [math.cos(angle), math.sin(angle)]
            push = strength * np.sin(2 * math.pi * along / length + phase)
            out += push[:, None] * [-math.sin(angle), math.cos(angle)]
        return out

    return bend


def _apply(bend: Callable[[NDArray[np.float64]], NDArray[np.float64]], line: LineString) -> LineString:
    dense = shapely.get_coordinates(shapely.segmentize(line, 0.8))
    return LineString(bend(dense)).simplify(0.001)


def _open_spot(rng: Rng, axes: list[Axis], extent: float, size: float) -> tuple[float, float]:
    """The place furthest from all streets among some tries."""
    tries = rng.uniform(-1, 1, (40, 2)) * max(20.0, 0.8 * extent - 0.5 * size)
    gaps = shapely.distance(shapely.MultiLineString([line for line, _ in axes]), shapely.points(tries))
    x, y = tries[int(np.argmax(gaps))] + rng.normal(0, 0.1 * size, 2)
    return float(x), float(y)


def _focus(rng: Rng, axes: list[Axis], extent: float, size: float) -> tuple[float, float]:
    """Where to put the frame's middle: near a junction."""
    ends = np.array([p for line, _ in axes for p in (line.coords[0], line.coords[-1])])
    near = ends[np.hypot(*ends.T) < 0.9 * extent - 0.5 * size] if len(ends) else ends
    if not len(near):
        return 0.0, 0.0
    spot = near[rng.integers(len(near))]
    return tuple(spot + rng.normal(0, 0.12 * size, 2))


def dress(rng: Rng, axes: list[Axis], rules: StreetOdds) -> list[Road]:
    """Give every axis a carriageway, lanes and edgings; a place keeps to one family of curbs and footways."""
    family = Family(rng, rules)
    return [_road(rng, line, rank, rules, family) for line, rank in axes]


def _road(rng: Rng, line: LineString, rank: str, rules: StreetOdds, family: Family) -> Road:
    boulevard = rank == "main" and chance(rng, odds.BOULEVARD)
    width = round(between(rng, odds.BOULEVARD_WIDTH if boulevard else rules.width[rank]), 2)
    oneway = not boulevard and (width < 5.0 or chance(rng, 0.12))
    wanted = boulevard or chance(rng, rules.median * (2.0 if rank == "main" else 0.7))
    median = median_width(rng, width) if wanted and not oneway else 0.0
    lanes = _lanes(width - median, oneway, rank)
    material = pick(rng, rules.surface) if chance(rng, 0.35) else family.surface
    parking = [width > 6 and chance(rng, rules.parking) for _ in range(2)]
    flush = chance(rng, rules.flush_alley if rank == "alley" else rules.flush)
    right, left = (_side(rng, rules, family, flush, material) for _ in range(2))
    return Road(
        axis=Alignment(shapely.get_coordinates(line)), width=width, lanes=lanes, rank=rank, right=right, left=left,
        material=material, tone=float(np.clip(rng.normal(0, 0.45), -1, 1)), oneway=oneway, median=median,
        parking=(parking[0], parking[1]), marked=width > 4.8 and chance(rng, rules.marked),
        direction=Alignment(shapely.get_coordinates(line)).heading(0.0) + pick(rng, {0.0: 0.7, 0.785: 0.3}),
    )  # fmt: skip


def _lanes(width: float, oneway: bool, rank: str) -> int:
    """Number of lanes on `width` metres of carriageway; even where a median or a centre line parts them."""
    if oneway:
        return 1 if width < 5.5 else 2
    if width < 4.8:
        return 1
    return min(8, 2 * int(width // 6.4)) if rank == "main" and width > 12.8 else 2


class Family:
    """What the streets of one place have in common."""

    def __init__(self, rng: Rng, rules: StreetOdds):
        self.surface = pick(rng, rules.surface)
        self.gutter, self.stone = odds.gutter_and_stone(rng, rules.gutter, rules.stone)
        self.gutter_material = pick(rng, odds.GUTTER_ODDS)
        self.stone_material = pick(rng, odds.STONE_ODDS)
        self.stone_tone = pick_between(rng, odds.STONE_TONE_ODDS)
        self.footway_material = pick(rng, odds.FOOTWAY_ODDS)
        self.verge_material = pick(rng, odds.VERGE_ODDS)
        self.height = round(between(rng, odds.CURB_HEIGHT), 3)


def _side(rng: Rng, rules: StreetOdds, family: Family, flush: bool, material: str) -> Edging:
    """One side of a street, mostly as its family has it."""
    if flush:
        return flush_edging(rng)
    own = Family(rng, rules) if chance(rng, 0.25) else family
    footway = between(rng, rules.footway_width) if chance(rng, rules.footway) else 0.0
    same = material == "asphalt" and chance(rng, odds.FOOTWAY_LIKE_ROAD)
    thin_strip = rng.uniform(0.3, 0.9) if chance(rng, odds.THIN_STRIP) else 0.0
    return Edging(
        height=own.height, gutter=own.gutter, gutter_material=own.gutter_material, stone=own.stone,
        stone_material=own.stone_material, stone_tone=own.stone_tone,
        verge=rng.uniform(0.5, 3.0) if chance(rng, rules.verge) else thin_strip, verge_material=own.verge_material,
        footway=footway, footway_material="asphalt" if same else own.footway_material,
    )  # fmt: skip


def flush_edging(rng: Rng) -> Edging:
    """The end of the pavement with a loose shoulder or grass right beside it, at times a row of stones."""
    shoulder = pick(rng, {"grass": 0.35, "dry_grass": 0.15, "gravel": 0.25, "soil": 0.25})
    wide = pick_between(rng, odds.SHOULDER)
    stone = rng.uniform(0.08, 0.25) if chance(rng, 0.15) else 0.0
    return Edging(
        "flush",
        0.0,
        stone=stone,
        stone_material=pick(rng, odds.STONE_ODDS),
        verge=wide,
        verge_material=shoulder,
    )


def plan_town(rng: Rng, size: float, style: str) -> Plan:
    """Streets, junctions, islands, bays and lots of a town."""
    rules = odds.STREETS[style]
    scale = pick(rng, odds.BLOCK_SCALE_LARGE if size > odds.LARGE_FRAME else odds.BLOCK_SCALE)
    if not rules.in_block:
        rules = replace(rules, block=(scale * rules.block[0], scale * rules.block[1]))
    window = box(-PLAN_REACH, -PLAN_REACH, size + PLAN_REACH, size + PLAN_REACH)
    plan = Plan(size, style, dress(rng, street_axes(rng, size, PLAN_REACH, rules), rules))
    plan.land, plan.driveway_every = odds.LAND[style], rules.driveway_every
    plan.junctions, plan.islands = junctions(rng, plan.roads, window)
    crosswalks(rng, plan)
    bays(rng, plan, rules.bays)
    dead_ends(rng, plan, window)
    plan.islands += medians(rng, plan, odds.SHORT_ISLAND)
    place_lots(rng, plan, rough_surface(plan), window, rules.lots)
    return plan
