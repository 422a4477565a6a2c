"""From a seed to a world: plan the roads, find the edge, then furnish the place."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Callable

import numpy as np
import shapely
from shapely.geometry import MultiPolygon, Polygon, box

from roadhem.errors import BadInput
from roadhem_training.scenes.layout import bands, clutter, land, lowering, markings, paving, traffic, trees
from roadhem_training.scenes.layout.country import plan_country
from roadhem_training.scenes.layout.motorway import plan_motorway
from roadhem_training.scenes.layout.odds import STYLE_ODDS, pick
from roadhem_training.scenes.layout.open_land import plan_open_land
from roadhem_training.scenes.layout.overlay import clipped, less
from roadhem_training.scenes.layout.plan import Plan
from roadhem_training.scenes.layout.streets import plan_town
from roadhem_training.scenes.layout.stretches import Stretch, boundary_stretches
from roadhem_training.scenes.layout.surface import unite
from roadhem_training.scenes.world import MARGIN, Cover, OtherLine, TrueEdge, World

Rng = np.random.Generator

SMALLEST, LARGEST = 25.0, 600.0
SLOPE = 0.02  # standard deviation of the ground's slope
CROSSFALL = (0.0, 0.03)
ON_ROAD, ON_LAND = ("gutter_seam", "joint"), ("curb_back", "verge", "footway")
PLANNERS: dict[str, Callable[[Rng, float, str], Plan]] = {
    "old_town": plan_town,
    "suburb": plan_town,
    "industry": plan_town,
    "car_park": plan_town,
    "country": plan_country,
    "motorway": plan_motorway,
    "no_road": plan_open_land,
}


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
        raise BadInput(
            f"A world of {size:g} m cannot be made: choose a size from {SMALLEST:g} to {LARGEST:g} m."
        )
    if style is not None and style not in STYLE_ODDS:
        raise BadInput(f"There is no style {style!r}: choose one of {', '.join(STYLE_ODDS)}.")
    rng = np.random.default_rng(seed)
    drawn = pick(rng, STYLE_ODDS)
    style = style or drawn
    plan = PLANNERS[style](rng, size, style)
    surface = unite(plan, MARGIN)
    world = World(size, style, surface)
    _furnish(rng, plan, world, surface)
    world.slope = (float(rng.normal(0, SLOPE)), float(rng.normal(0, SLOPE)))
    world.crossfall = float(rng.uniform(*CROSSFALL))
    return world


def _furnish(rng: Rng, plan: Plan, world: World, surface: MultiPolygon) -> None:
    whole = boundary_stretches(plan, surface, MARGIN)
    pieces, drives = _changed(rng, plan, whole)
    world.edges = [TrueEdge(p.line, p.edging.kind, p.edging.height) for p in pieces]
    world.others = [line for piece in pieces for line in bands.other_lines(piece)] + plan.lines
    frame = box(-MARGIN, -MARGIN, plan.size + MARGIN, plan.size + MARGIN)
    faces = plan.parcels or list(less(frame, surface).geoms)
    season = trees.Season(rng)
    world.ground.append(Cover(frame, "soil"))
    for face, front in zip(faces, _fronts(faces, pieces), strict=True):
        land.fill(rng, world, plan, season, face, front)
        world.curb_stones += bands.curb_stones(front, face)
    world.ground += drives + plan.under
    paving.pave(rng, world, plan, surface)
    world.ground += plan.covers + paving.joints_seen(world.others) + bands.gutters(pieces, surface)
    for piece in pieces:
        world.ground += paving.encroach(rng, piece)
        world.crowns += trees.avenue(rng, season, piece)
        bodies, lines = clutter.along(rng, piece)
        world.bodies += bodies
        world.others += lines
    world.crowns += plan.crowns
    world.paints, lines = markings.paint(rng, plan, surface)
    world.others += lines
    cars = plan.bodies + traffic.parked(rng, plan, pieces) + traffic.moving(rng, plan, surface)
    world.bodies += traffic.apart(cars)
    world.others = _trimmed(world.others, frame, surface)


def _trimmed(lines: list[OtherLine], frame: Polygon, surface: MultiPolygon) -> list[OtherLine]:
    """Lines cut to where they are: on the road, on the land, and within the frame and its margin."""
    road = [line for line in lines if line.what in ON_ROAD]
    ground = [line for line in lines if line.what in ON_LAND]
    rest = [line for line in lines if line.what not in ON_ROAD + ON_LAND]
    out = []
    for group, area in ((road, surface), (ground, less(frame, surface)), (rest, frame)):
        pieces = clipped([line.line for line in group], area)
        out += [OtherLine(p, line.what) for line, own in zip(group, pieces, strict=True) for p in own]
    return out


def _changed(rng: Rng, plan: Plan, whole: list[Stretch]) -> tuple[list[Stretch], list[Cover]]:
    """The stretches cut where their edging changes, and the paving of driveways."""
    changes = defaultdict(list)
    for c in plan.changes:
        changes[c.road, c.side].append(c)
    pieces: list[Stretch] = []
    drives: list[Cover] = []
    for stretch in whole:
        own, paving_ = lowering.change(rng, plan, stretch, changes[stretch.road, stretch.side])
        pieces += own
        drives += paving_
    return pieces, drives


def _fronts(faces: list[Polygon], stretches: list[Stretch]) -> list[list[Stretch]]:
    """For each piece of land, the stretches that bound it."""
    fronts: list[list[Stretch]] = [[] for _ in faces]
    if stretches and faces:
        middles = shapely.line_interpolate_point([s.line for s in stretches], 0.5, normalized=True)
        home = shapely.STRtree(faces).query_nearest(middles, all_matches=False)[1]
        for stretch, k in zip(stretches, home, strict=True):
            fronts[k].append(stretch)
    return fronts
