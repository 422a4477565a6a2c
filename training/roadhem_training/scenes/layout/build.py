"""From a seed to a world: plan the roads, find the edge, then furnish the place."""

from __future__ import annotations

import numpy as np
import shapely
from shapely.geometry import MultiPolygon, box
from shapely.geometry.base import BaseGeometry

from roadhem.errors import BadInput
from roadhem_training.scenes.layout import bands, blocks, drives, markings, medians, streets, traffic, trees
from roadhem_training.scenes.layout.junctions import junctions
from roadhem_training.scenes.layout.odds import STREETS, STYLE_ODDS, pick
from roadhem_training.scenes.layout.plan import Plan
from roadhem_training.scenes.layout.stretches import Stretch, boundary_stretches
from roadhem_training.scenes.layout.surface import polygons, unite
from roadhem_training.scenes.world import MARGIN, Cover, TrueEdge, World

SMALLEST, LARGEST = 25.0, 600.0
PLAN_REACH = MARGIN + 25.0  # metres beyond the frame to which roads are planned


def make_world(seed: int, size: float, style: str | None = None) -> World:
    """Invent a place.

    Parameters
    ----------
    seed : any integer >= 0; the same seed, size and style give the same world.
    size : side of the square frame, metres, 25 to 600.
    style : one of STYLE_ODDS, or None to draw one by its odds.

    Raises
    ------
    BadInput : a size or style that cannot be made.
    """
    if not SMALLEST <= size <= LARGEST:
        raise BadInput(f"A world of {size:g} m cannot be made: choose a size from {SMALLEST:g} to {LARGEST:g} m.")
    if style is not None and style not in STYLE_ODDS:
        raise BadInput(f"There is no style {style!r}: choose one of {', '.join(STYLE_ODDS)}.")
    rng = np.random.default_rng(seed)
    drawn = pick(rng, STYLE_ODDS)
    style = style or drawn
    plan = _plan(rng, size, style)
    surface = unite(plan, MARGIN)
    world = World(size, style, surface)
    _furnish(rng, plan, world, surface)
    world.slope = (float(rng.normal(0, 0.02)), float(rng.normal(0, 0.02)))
    world.crossfall = float(rng.uniform(0.0, 0.03))
    return world


def _plan(rng: np.random.Generator, size: float, style: str) -> Plan:
    rules = STREETS[style]
    roads = streets.dress(rng, streets.street_axes(rng, size, PLAN_REACH, rules), rules)
    nodes = junctions(rng, roads)
    plan = Plan(size, style, roads, nodes)
    plan.islands = medians.medians(rng, roads, nodes, rules.median)
    return plan


def _furnish(rng: np.random.Generator, plan: Plan, world: World, surface: MultiPolygon) -> None:
    frame = box(-MARGIN, -MARGIN, plan.size + MARGIN, plan.size + MARGIN)
    rules, style, season = STREETS[plan.style], plan.style, trees.Season(rng)
    whole = boundary_stretches(plan, surface, MARGIN)
    faces = polygons(frame.difference(surface))
    world.ground.append(Cover(frame, pick(rng, blocks.LAND[style])))
    paving: list[Cover] = []
    pieces: list[Stretch] = []
    for stretch in whole:
        cut, covers = drives.lower(rng, stretch, rules.driveway_every)
        pieces += cut
        paving += covers
    world.edges = [TrueEdge(p.line, p.edging.kind, p.edging.height) for p in pieces]
    world.others = [line for stretch in whole for line in bands.other_lines(stretch)]
    home = _homes(faces, whole)
    for k, face in enumerate(faces):
        _fill(rng, world, plan, season, face, [s for s, f in zip(whole, home, strict=True) if f == k])
    world.ground += paving
    _pave(world, plan, surface)
    for piece, f in zip(pieces, _homes(faces, pieces), strict=True):
        world.ground += bands.gutter(piece, surface)
        world.curb_stones += bands.curb_stone(piece, faces[f])
        world.crowns += trees.avenue(rng, season, piece)
    world.paints, lines = markings.paint(rng, plan, surface)
    world.others += lines
    world.bodies += traffic.apart(traffic.parked(rng, plan, pieces) + traffic.moving(rng, plan, surface))


def _homes(faces: list[BaseGeometry], stretches: list[Stretch]) -> list[int]:
    """For each stretch, the piece of land it bounds."""
    if not stretches:
        return []
    middles = shapely.line_interpolate_point([s.line for s in stretches], 0.5, normalized=True)
    return shapely.STRtree(faces).query_nearest(middles, all_matches=False)[1].tolist()


def _fill(
    rng: np.random.Generator, world: World, plan: Plan, season: trees.Season, face: BaseGeometry, front: list[Stretch]
) -> None:
    """Ground, footways, houses and trees of one piece of land."""
    relief = front[0].edging.height if front else 0.0
    middle = face.representative_point()
    for island in plan.islands:
        if island.area.contains(middle):
            world.ground.append(Cover(face, island.fill, float(rng.normal(0, 0.3)), relief=relief))
            if island.fill in ("grass", "planting"):
                world.crowns += trees.scattered(rng, season, face.buffer(-0.4), 150)
            return
    style = plan.style
    world.ground.append(Cover(face, pick(rng, blocks.LAND[style]), float(rng.normal(0, 0.3)), relief=relief))
    walks = [cover for stretch in front for cover in bands.walks(stretch, face)]
    world.ground += walks
    stones = [bands.band(s, s.edging.stone, face) for s in front if s.edging.stone]
    plot = face.difference(shapely.union_all([c.area for c in walks] + stones)).buffer(-0.05)
    built = blocks.houses(rng, style, plot, front)
    bodies, lines = blocks.enclosure(rng, style, plot)
    world.bodies += built + bodies
    world.others += lines
    garden = plot.buffer(-0.8).difference(shapely.union_all([b.footprint.buffer(0.8) for b in built]))
    world.crowns += trees.scattered(rng, season, garden, trees.PER_HECTARE[style])


def _pave(world: World, plan: Plan, surface: MultiPolygon) -> None:
    """The carriageways, side streets first so that main roads run through."""
    if plan.roads:
        usual = plan.roads[0]
        world.ground.append(Cover(surface, usual.material, usual.tone, direction=usual.direction))
    ranks = {"alley": 0, "street": 1, "main": 2}
    for road in sorted(plan.roads, key=lambda r: ranks.get(r.rank, 1)):
        for area in polygons(road.area.intersection(surface)):
            world.ground.append(Cover(area, road.material, road.tone, direction=road.direction))
