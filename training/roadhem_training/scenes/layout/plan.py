"""The plan of a place: roads, junctions and areas to drive on, before their common edge is known."""

from __future__ import annotations

from dataclasses import dataclass, field

from shapely.geometry import Polygon
from shapely.geometry.base import BaseGeometry

from roadhem_training.scenes.layout.alignment import Alignment


@dataclass(frozen=True)
class Edging:
    """How the drive-over surface ends, from the road outwards; widths in metres, 0 where there is none.

    Attributes
    ----------
    kind, height : as in TrueEdge.
    gutter, stone, verge, footway : widths of the gutter (inside) and of curb stone, verge and footway (outside).
    stone_tone : of the curb stone against the road, -1..1.
    """

    kind: str = "raised"
    height: float = 0.12
    gutter: float = 0.0
    gutter_material: str = "concrete"
    stone: float = 0.0
    stone_tone: float = 0.0
    verge: float = 0.0
    verge_material: str = "grass"
    footway: float = 0.0
    footway_material: str = "pavers"


@dataclass(frozen=True)
class Part:
    """A piece of drive-over surface that is no road: bay, yard, bulb, apron, car park."""

    area: Polygon
    edging: Edging
    material: str = "asphalt"
    tone: float = 0.0
    role: str = "yard"


@dataclass(frozen=True)
class Island:
    """A piece taken out of the drive-over surface; `fill` is the material inside its curb."""

    area: Polygon
    edging: Edging
    fill: str = "grass"
    role: str = "median"


@dataclass
class Road:
    """A carriageway of constant width about its axis; what widens it is a Part, what splits it an Island.

    Attributes
    ----------
    right, left : edging of its two sides.
    parking : (right, left), whether cars may stand along the side.
    """

    axis: Alignment
    width: float
    lanes: int
    rank: str
    right: Edging
    left: Edging
    material: str = "asphalt"
    tone: float = 0.0
    oneway: bool = False
    parking: tuple[bool, bool] = (False, False)
    marked: bool = True
    direction: float = 0.0

    @property
    def half(self) -> float:
        """Half the width."""
        return 0.5 * self.width

    @property
    def area(self) -> Polygon:
        """The whole carriageway."""
        return self.axis.strip(0.0, self.axis.length, -self.half, self.half)


@dataclass(frozen=True)
class Leg:
    """A road as it leaves a junction. sign: +1 towards growing stations; heading: away from the junction."""

    road: int
    station: float
    sign: int
    heading: float
    reach: float  # metres from the node to where its curb returns end


@dataclass(frozen=True)
class Junction:
    """Where roads meet; corners: the pieces that round its curb returns; radii: of those corners, 0 is sharp."""

    x: float
    y: float
    legs: tuple[Leg, ...]
    corners: tuple[Polygon, ...]
    radii: tuple[float, ...]


@dataclass
class Plan:
    """All that decides where one can drive."""

    size: float
    style: str
    roads: list[Road] = field(default_factory=list)
    junctions: list[Junction] = field(default_factory=list)
    parts: list[Part] = field(default_factory=list)
    islands: list[Island] = field(default_factory=list)
    surface: BaseGeometry = field(default_factory=Polygon)
