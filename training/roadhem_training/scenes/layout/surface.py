"""The drive-over surface of a plan: the union of all one drives on, less the islands."""

from __future__ import annotations

import shapely
from shapely.geometry import MultiPolygon, Polygon, box
from shapely.geometry.base import BaseGeometry

from roadhem_training.scenes.layout.overlay import joined, polygons, shared
from roadhem_training.scenes.layout.plan import Plan
from roadhem_training.scenes.world import MARGIN

PLAN_REACH = MARGIN + 16.0  # metres beyond the frame to which roads are planned
GRID = 1e-4  # coordinates of the surface are rounded to this, metres, so that pieces fit without gaps
CRACK = 0.002  # cracks thinner than twice this between pieces that should touch are closed, metres
SMALLEST_HOLE = 0.4  # square metres; gaps below it are filled


def unite(plan: Plan, reach: float) -> MultiPolygon:
    """Surface of `plan` on the frame and `reach` metres beyond it; shells run anticlockwise."""
    pieces: list[BaseGeometry] = [road.area for road in plan.roads]
    pieces += [corner for junction in plan.junctions for corner in junction.corners]
    pieces += [part.area for part in plan.parts]
    if not pieces:
        return MultiPolygon()
    window = box(-reach, -reach, plan.size + reach, plan.size + reach)
    whole = shared(shapely.union_all(pieces, grid_size=GRID), window)
    whole = _filled(whole.buffer(CRACK, join_style="mitre").buffer(-CRACK, join_style="mitre"))
    if plan.islands:
        islands = shapely.union_all([i.area for i in plan.islands], grid_size=GRID)
        whole = shapely.difference(whole, islands, grid_size=GRID)
    return MultiPolygon([shapely.geometry.polygon.orient(p) for p in polygons(whole) if p.area > 1.0])


def rough_surface(plan: Plan) -> BaseGeometry:
    """What one can drive on so far, islands not taken out: to see where there is room."""
    pieces = [road.area for road in plan.roads]
    pieces += [corner for junction in plan.junctions for corner in junction.corners]
    return joined(pieces + [part.area for part in plan.parts])


def _filled(geometry: BaseGeometry) -> BaseGeometry:
    return MultiPolygon(
        [
            Polygon(p.exterior, [r for r in p.interiors if Polygon(r).area > SMALLEST_HOLE])
            for p in polygons(geometry)
        ]
    )
