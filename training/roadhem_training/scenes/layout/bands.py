"""What lies along the edge: gutters, curb stones, verges and footways, and the lines they make beside it."""

from __future__ import annotations

from collections import defaultdict

import shapely
from shapely.geometry import LineString, MultiPolygon
from shapely.geometry.base import BaseGeometry

from roadhem_training.scenes.layout.overlay import joined, shared
from roadhem_training.scenes.layout.stretches import Stretch
from roadhem_training.scenes.world import Cover, OtherLine

GUTTER_TONE, WALK_TONE = 0.15, 0.1
LEAST_LINE = 1.0  # metres; shorter lines beside an edge are left out


def beside(stretch: Stretch, distance: float) -> list[LineString]:
    """The line `distance` metres to the right of a stretch (left where negative), with its direction."""
    found = shapely.offset_curve(stretch.line, -distance, join_style="mitre", mitre_limit=3.0)
    return [g for g in shapely.get_parts(found) if isinstance(g, LineString) and g.length > LEAST_LINE]


def band(stretch: Stretch, far: float, within: BaseGeometry) -> MultiPolygon:
    """Area `within`, up to `far` metres from the stretch, cut square at its ends."""
    return shared(stretch.line.buffer(far, cap_style="flat", quad_segs=6), within)


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
        out += [OtherLine(line, "footway") for line in beside(stretch, e.depth)]
    return out


def _merged(areas: dict[tuple[str, float, float], list[BaseGeometry]]) -> list[Cover]:
    out = []
    for (material, tone, relief), pieces in areas.items():
        area = joined(pieces)
        if not area.is_empty:
            out.append(Cover(area, material, tone, relief=relief))
    return out


def gutters(stretches: list[Stretch], surface: BaseGeometry) -> list[Cover]:
    """The gutter strips, none where they are made of the road's own asphalt."""
    areas = defaultdict(list)
    for s in stretches:
        e = s.edging
        if e.gutter and e.gutter_material != "asphalt":
            areas[e.gutter_material, GUTTER_TONE, 0.0].append(band(s, e.gutter, surface))
    return _merged(areas)


def curb_stones(stretches: list[Stretch], face: BaseGeometry) -> list[Cover]:
    """The bands of curb stone just outside the edge of one piece of land."""
    areas = defaultdict(list)
    for s in stretches:
        e = s.edging
        if e.stone:
            areas[e.stone_material, e.stone_tone, e.height].append(band(s, e.stone, face))
    return _merged(areas)


def walks(stretches: list[Stretch], face: BaseGeometry) -> list[Cover]:
    """Footways, then the verges between them and the road, of one piece of land."""
    ways, verges = defaultdict(list), defaultdict(list)
    for s in stretches:
        e = s.edging
        relief = e.height
        if e.footway:
            ways[e.footway_material, WALK_TONE, relief].append(band(s, e.depth, face))
        if e.verge:
            verges[e.verge_material, 0.0, relief].append(band(s, e.stone + e.verge, face))
    return _merged(ways) + _merged(verges)
