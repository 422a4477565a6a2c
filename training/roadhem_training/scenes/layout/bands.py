"""What lies along the edge: gutters, curb stones, verges and footways, and the lines they make beside it."""

from __future__ import annotations

import shapely
from shapely.geometry import LineString
from shapely.geometry.base import BaseGeometry

from roadhem_training.scenes.layout.stretches import Stretch
from roadhem_training.scenes.layout.surface import polygons
from roadhem_training.scenes.world import Cover, OtherLine

GUTTER_TONE = 0.2
LEAST_LINE = 1.0  # metres; shorter lines beside an edge are left out


def beside(stretch: Stretch, distance: float) -> list[LineString]:
    """The line `distance` metres to the right of a stretch (left where negative), with its direction."""
    found = shapely.offset_curve(stretch.line, -distance, join_style="mitre", mitre_limit=3.0)
    return [g for g in shapely.get_parts(found) if isinstance(g, LineString) and g.length > LEAST_LINE]


def band(stretch: Stretch, far: float, within: BaseGeometry) -> BaseGeometry:
    """Area `within`, up to `far` metres from the stretch, cut square at its ends."""
    return shapely.intersection(stretch.line.buffer(far, cap_style="flat", quad_segs=6), within)


def other_lines(stretch: Stretch) -> list[OtherLine]:
    """Lines beside a stretch that are no drive-over edges."""
    e = stretch.edging
    out = []
    if e.gutter:
        out += [OtherLine(line, "gutter_seam") for line in beside(stretch, -e.gutter)]
    if e.stone:
        out += [OtherLine(line, "curb_back") for line in beside(stretch, e.stone)]
    if e.verge:
        out += [OtherLine(line, "verge") for line in beside(stretch, e.stone + e.verge)]
    if e.footway:
        out += [OtherLine(line, "footway") for line in beside(stretch, e.stone + e.verge + e.footway)]
    return out


def gutter(stretch: Stretch, surface: BaseGeometry) -> list[Cover]:
    """The gutter strip inside a stretch, none where it is made of the road's own asphalt."""
    e = stretch.edging
    if not e.gutter or e.gutter_material == "asphalt":
        return []
    return [Cover(g, e.gutter_material, GUTTER_TONE) for g in polygons(band(stretch, e.gutter, surface))]


def curb_stone(stretch: Stretch, face: BaseGeometry) -> list[Cover]:
    """The band of curb stone just outside a stretch."""
    e = stretch.edging
    if not e.stone:
        return []
    relief = e.height
    return [Cover(g, "concrete", e.stone_tone, relief=relief) for g in polygons(band(stretch, e.stone, face))]


def walks(stretch: Stretch, face: BaseGeometry) -> list[Cover]:
    """Footway, then the verge between it and the road."""
    e = stretch.edging
    out = []
    if e.footway:
        area = band(stretch, e.stone + e.verge + e.footway, face)
        out += [Cover(g, e.footway_material, 0.1, relief=e.height) for g in polygons(area)]
    if e.verge:
        area = band(stretch, e.stone + e.verge, face)
        out += [Cover(g, e.verge_material, 0.0, relief=e.height) for g in polygons(area)]
    return out
