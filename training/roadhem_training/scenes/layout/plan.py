"""The plan of a place: roads, junctions and areas to drive on, before their common edge is known."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

from shapely.geometry import MultiPolygon, Polygon

from roadhem_training.scenes.layout.alignment import Alignment, Offset
from roadhem_training.scenes.layout.overlay import joined, less
from roadhem_training.scenes.world import Body, Cover, Crown, OtherLine, Paint


@dataclass(frozen=True)
class Edging:
    """How the drive-over surface ends, from the road outwards; widths in metres, 0 where there is none.

    Attributes
    ----------
    kind, height : as in TrueEdge.
    gutter, stone, verge, footway : widths of the gutter (inside) and of curb stone, verge and footway (outside).
    stone_material, stone_tone : of the curb stone; tone against its material's own mean, -1..1.
    """

    kind: str = "raised"
    height: float = 0.12
    gutter: float = 0.0
    gutter_material: str = "concrete"
    stone: float = 0.0
    stone_material: str = "curb"
    stone_tone: float = 0.0
    verge: float = 0.0
    verge_material: str = "grass"
    footway: float = 0.0
    footway_material: str = "pavers"

    def bare(self) -> Edging:
        """The same curb without verge and footway, as round an island."""
        return replace(self, kind="raised", height=max(self.height, 0.08), stone=self.stone or 0.12, verge=0.0,
                       footway=0.0)  # fmt: skip

    @property
    def depth(self) -> float:
        """Metres from the edge to the land behind verge and footway."""
        return self.stone + self.verge + self.footway


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
    """A piece taken out of the drive-over surface; `fill` is the material inside its curb.

    role : "median", "island", "round" (middle of a roundabout), "build_out" or "lot".
    """

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
    shoulders : (right, left), widths of paved shoulder outside the lanes.
    median : width of the island all along its middle, 0 where there is none.
    beyond : what its square ends would wrongly cover on the far side of the roads they meet.
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
    shoulders: tuple[float, float] = (0.0, 0.0)
    median: float = 0.0
    direction: float = 0.0
    beyond: list[Polygon] = field(default_factory=list)

    @property
    def half(self) -> float:
        """Half the width."""
        return 0.5 * self.width

    @property
    def area(self) -> Polygon | MultiPolygon:
        """The whole carriageway."""
        whole = self.axis.strip(0.0, self.axis.length, -self.half, self.half)
        return less(whole, joined(self.beyond)) if self.beyond else whole

    def beside(self, side: int, s0: float, s1: float, near: Offset, far: Offset, step: float) -> Polygon:
        """Area on one side (-1 right, 1 left) between two signed offsets, `far` the one further out."""
        right, left = (far, near) if side < 0 else (near, far)
        return self.axis.strip(s0, s1, right, left, step)


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
    """Where roads meet.

    Attributes
    ----------
    corners : the pieces that round its curb returns; radii : of those corners, 0 is sharp.
    round : whether traffic goes round its middle.
    """

    x: float
    y: float
    legs: tuple[Leg, ...]
    corners: tuple[Polygon, ...]
    radii: tuple[float, ...]
    round: bool = False


@dataclass(frozen=True)
class Change:
    """Another edging on one side (-1 right, 1 left) of a road between two stations: a ramp, a bay of other paving."""

    road: int
    side: int
    s0: float
    s1: float
    edging: Edging
    role: str


@dataclass(frozen=True)
class Crosswalk:
    """Where people cross a road, between two stations."""

    road: int
    s0: float
    s1: float
    marked: bool


@dataclass
class Plan:
    """All that decides where one can drive, and what the planner of a style already knows to stand or lie there.

    Attributes
    ----------
    land : odds of what fills the land between the roads.
    parcels : the pieces of land where there is no road to bound them.
    under, covers : ground to paint under and over the carriageways; paints, bodies, crowns, lines : as in World.
    taken : by (road, side), the stations where something is at the side already.
    """

    size: float
    style: str
    roads: list[Road] = field(default_factory=list)
    junctions: list[Junction] = field(default_factory=list)
    parts: list[Part] = field(default_factory=list)
    islands: list[Island] = field(default_factory=list)
    changes: list[Change] = field(default_factory=list)
    crosswalks: list[Crosswalk] = field(default_factory=list)
    land: Mapping[str, float] = field(default_factory=dict)
    driveway_every: tuple[float, float] = (20.0, 50.0)
    parcels: list[Polygon] = field(default_factory=list)
    under: list[Cover] = field(default_factory=list)
    covers: list[Cover] = field(default_factory=list)
    paints: list[Paint] = field(default_factory=list)
    bodies: list[Body] = field(default_factory=list)
    crowns: list[Crown] = field(default_factory=list)
    lines: list[OtherLine] = field(default_factory=list)
    taken: dict[tuple[int, int], list[tuple[float, float]]] = field(default_factory=dict)

    def take(self, road: int, side: int, s0: float, s1: float) -> bool:
        """Reserve a side of a road between two stations; False if something is there already."""
        spans = self.taken.setdefault((road, side), [])
        if any(s0 < b and a < s1 for a, b in spans):
            return False
        spans.append((s0, s1))
        return True

    def clear_spans(self, index: int, least: float = 4.0) -> list[tuple[float, float]]:
        """Stations (from, to) of the stretches of a road, `least` metres or longer, outside its junctions."""
        length = self.roads[index].axis.length
        taken = [(0.0, 0.0), (length, length)]
        for node in self.junctions:
            for leg in node.legs:
                if leg.road == index:
                    a, b = sorted((leg.station, leg.station + leg.sign * leg.reach))
                    taken.append((a, b))
        taken.sort()
        spans, at = [], 0.0
        for a, b in taken:
            if a - at > least:
                spans.append((at, a))
            at = max(at, b)
        return spans

    def ends(self, index: int) -> list[tuple[float, int]]:
        """(station, sign outwards) of the ends of a road that meet no other."""
        axis = self.roads[index].axis
        met = [leg.station for node in self.junctions for leg in node.legs if leg.road == index]
        return [(s, sign) for s, sign in ((0.0, -1), (axis.length, 1)) if all(abs(s - m) > 2.5 for m in met)]
