"""The invented world: vector truth in metres, before anyone photographs it.

All coordinates are local metres: x east, y north, (0, 0) the lower left corner of the frame, (size, size) the upper
right. Content goes on for MARGIN metres beyond the frame, so that nothing ends at its border.
"""

from __future__ import annotations

from dataclasses import dataclass, field

from shapely.geometry import LineString, MultiPolygon, Polygon
from shapely.geometry.base import BaseGeometry

MARGIN = 12.0


@dataclass(frozen=True)
class TrueEdge:
    """A stretch of drive-over edge with one kind; the drive-over surface lies left of the line.

    Consecutive stretches of one boundary share end points, so that the boundary is whole.

    Attributes
    ----------
    line : the foot of the curb face, or the end of the bound pavement where it is flush.
    kind : "raised", "lowered" or "flush".
    height : height of the curb above the road at its foot, metres (0 where flush).
    level : 0 ground, 1 bridge.
    """

    line: LineString
    kind: str
    height: float = 0.12
    level: int = 0


@dataclass(frozen=True)
class OtherLine:
    """A line that is not a drive-over edge but looks like one.

    Attributes
    ----------
    what : "gutter_seam", "curb_back", "verge", "footway", "marking", "wall", "roof", "hedge", "rail", "joint".
    """

    line: LineString
    what: str


@dataclass(frozen=True)
class Cover:
    """A piece of ground with one material, painted in list order over what came before.

    Attributes
    ----------
    material : a name the renderer knows (asphalt, concrete, setts, pavers, gravel, soil, grass, sand, planting, ...).
    tone : -1 darker .. 1 lighter than the material's own mean; edge_softness : metres over which it fades out.
    relief : metres added to the ground height inside (curb-raised footways, islands).
    direction : radians, for materials with rows (pavers, mown grass, slabs).
    """

    area: BaseGeometry
    material: str
    tone: float = 0.0
    edge_softness: float = 0.0
    relief: float = 0.0
    direction: float = 0.0


@dataclass(frozen=True)
class Paint:
    """A road marking. wear: 0 fresh .. 1 gone; colour: "white", "yellow", "blue" or "red"."""

    area: BaseGeometry
    colour: str = "white"
    wear: float = 0.2


@dataclass(frozen=True)
class Body:
    """Something that stands on the ground, hides what is under it and throws a shadow.

    Attributes
    ----------
    base, top : metres above the ground (a car's overhang has base > 0; a bridge deck is a body too).
    what : "house", "hall", "wall", "fence", "hedge", "car", "truck", "pole", "post", "bin", "rail", "shelter".
    tint : 0..1, picks a colour within what the renderer knows for it.
    """

    footprint: Polygon | MultiPolygon
    top: float
    what: str
    base: float = 0.0
    tint: float = 0.5
    roof: str = "flat"
    direction: float = 0.0


@dataclass(frozen=True)
class Crown:
    """A tree. density: 0 bare branches .. 1 closed; species: "round", "columnar", "conifer", "bush"."""

    x: float
    y: float
    radius: float
    height: float
    density: float = 0.9
    species: str = "round"
    tint: float = 0.5


@dataclass
class World:
    """Everything in one invented place.

    Attributes
    ----------
    size : side of the square frame, metres.
    style : "old_town", "suburb", "industry", "country", "motorway", "car_park" or "no_road".
    surface : the drive-over surface, with margin.
    edges, others : the truth, clipped to the frame plus margin.
    ground : covers in painting order; the first ones fill frame and margin wholly.
    curb_stones : bands of curb stone (area, tone -1..1 against the road), painted after ground.
    slope : (rise east, rise north), metres per metre; crossfall : of the road from its middle, metres per metre.
    """

    size: float
    style: str
    surface: Polygon | MultiPolygon
    edges: list[TrueEdge] = field(default_factory=list)
    others: list[OtherLine] = field(default_factory=list)
    ground: list[Cover] = field(default_factory=list)
    curb_stones: list[Cover] = field(default_factory=list)
    paints: list[Paint] = field(default_factory=list)
    bodies: list[Body] = field(default_factory=list)
    crowns: list[Crown] = field(default_factory=list)
    slope: tuple[float, float] = (0.0, 0.0)
    crossfall: float = 0.02
