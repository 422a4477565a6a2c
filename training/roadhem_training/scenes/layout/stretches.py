"""The boundary of the surface cut into stretches: each has one edging, and whatever stands beside hangs on it."""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry import LineString, MultiPolygon
from shapely.geometry.base import BaseGeometry

from roadhem_training.scenes.layout.plan import Edging, Plan

SHORTEST = 0.8  # metres of boundary that one owner holds at least
DECIMALS = 7  # of coordinates, metres: the same place gives the same numbers whichever way it is reached
SAMPLE = 0.5  # metres between the places where the owner of a boundary is asked


@dataclass(frozen=True)
class Stretch:
    """A piece of the boundary, surface on its left, with what ends it.

    owner : "road", a part's role or an island's role; road : its index in the plan, or -1; side : -1 right, 1 left.
    ring : number of the boundary it lies on; start : metres along that boundary.
    """

    line: LineString
    edging: Edging
    owner: str
    road: int = -1
    side: int = 0
    ring: int = 0
    start: float = 0.0


@dataclass(frozen=True)
class _Owner:
    line: BaseGeometry
    edging: Edging
    name: str
    road: int = -1
    side: int = 0


def boundary_stretches(plan: Plan, surface: MultiPolygon, reach: float) -> list[Stretch]:
    """All stretches of the boundary of `surface`, without the cut at `reach` metres beyond the frame."""
    owners = _owners(plan)
    segments = [_segments(o.line) for o in owners]
    if not segments:
        return []
    owner_of = np.repeat(np.arange(len(owners)), [len(g) for g in segments])
    tree = shapely.STRtree(np.concatenate(segments))
    low, high = -reach + 1e-4, plan.size + reach - 1e-4
    out = []
    rings = [r for p in surface.geoms for r in (p.exterior, *p.interiors)]
    for number, ring in enumerate(rings):
        at = Chain(shapely.get_coordinates(ring))
        s = np.union1d(np.arange(0.0, at.length, SAMPLE), at.s)
        s = s[np.concatenate([[True], np.diff(s) > 1e-7])]
        middle = at.points(0.5 * (s[1:] + s[:-1]))
        nearest = owner_of[tree.query_nearest(shapely.points(middle), all_matches=False)[1]]
        inside = np.all((middle > low) & (middle < high), axis=1)
        label = _steady(np.where(inside, nearest, -1), np.diff(s))
        out += _runs(at, s, label, owners, number)
    return out


def _steady(label: NDArray[np.intp], length: NDArray[np.float64]) -> NDArray[np.intp]:
    """Labels where owners that hold for less than SHORTEST metres yield to the one before."""
    label = label.copy()
    starts = np.concatenate([[0], np.flatnonzero(label[1:] != label[:-1]) + 1, [len(label)]])
    for a, b in pairwise(starts):
        if label[a] >= 0 and label[a - 1] >= 0 and length[a:b].sum() < SHORTEST:
            label[a:b] = label[a - 1]
    return label


def _owners(plan: Plan) -> list[_Owner]:
    owners = []
    for k, road in enumerate(plan.roads):
        axis = road.axis
        for side, edging in ((-1, road.right), (1, road.left)):
            line = LineString(axis.parallel(0.0, axis.length, side * road.half))
            owners.append(_Owner(line, edging, "road", k, side))
    owners += [_Owner(p.area.boundary, p.edging, p.role) for p in plan.parts]
    owners += [_Owner(i.area.boundary, i.edging, i.role) for i in plan.islands]
    return owners


def _segments(line: BaseGeometry) -> NDArray[np.object_]:
    """A line or ring in two-point pieces, which a search tree tells apart better."""
    pieces = []
    for part in shapely.get_parts(line):
        xy = shapely.get_coordinates(part)
        pieces.append(shapely.linestrings(np.stack([xy[:-1], xy[1:]], axis=1)))
    return np.concatenate(pieces)


def _runs(
    at: Chain, s: NDArray[np.float64], label: NDArray[np.intp], owners: list[_Owner], ring: int
) -> list[Stretch]:
    turns = np.flatnonzero(label[1:] != label[:-1]) + 1
    first = int(turns[0]) if len(turns) and label[0] == label[-1] else 0
    bounds = sorted({first, *map(int, turns)}) if len(turns) else [0]
    out = []
    for k, a in enumerate(bounds):
        b = bounds[k + 1] if k + 1 < len(bounds) else len(label) + (bounds[0] if first else 0)
        owner = owners[label[a % len(label)]]
        if label[a % len(label)] < 0:
            continue
        line = at.piece(s[a], s[b] if b < len(s) else at.length + s[b - len(label)])
        out.append(Stretch(line, owner.edging, owner.name, owner.road, owner.side, ring, float(s[a])))
    return out


class Chain:
    """A closed line by metres along it."""

    def __init__(self, xy: NDArray[np.float64]):
        self.xy = xy
        self.s = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(xy, axis=0).T))])
        self.length = float(self.s[-1])

    def points(self, s: NDArray[np.float64]) -> NDArray[np.float64]:
        """Points (n, 2) at metres `s`, counted on beyond the end."""
        return self._between(np.mod(s, self.length))

    def _between(self, s: NDArray[np.float64]) -> NDArray[np.float64]:
        xy = np.stack([np.interp(s, self.s, self.xy[:, 0]), np.interp(s, self.s, self.xy[:, 1])], axis=1)
        return np.round(xy, DECIMALS)

    def piece(self, s0: float, s1: float) -> LineString:
        """The line from metre s0 to s1 > s0; s1 may lie beyond the end by less than one round."""
        s = np.concatenate([self.s, self.s[1:] + self.length])
        xy = np.concatenate([self.xy, self.xy[1:]])
        inner = (s > s0 + 1e-6) & (s < s1 - 1e-6)
        ends = self.points(np.array([s0, s1]))
        if abs(s1 - s0 - self.length) < 1e-6:
            ends[1] = ends[0]
        return LineString(np.concatenate([ends[:1], xy[inner], ends[1:]]))


def cut(stretch: Stretch, lowered: list[tuple[float, float, Edging]]) -> list[Stretch]:
    """`stretch` with the intervals (from, to, edging), ascending metres along it, given their own edging."""
    at = 0.0
    chain = OpenChain(stretch.line)
    out = []
    for a, b, edging in lowered:
        if a - at > 1e-6:
            out.append(replace(stretch, line=chain.piece(at, a), start=stretch.start + at))
        out.append(replace(stretch, line=chain.piece(a, b), edging=edging, start=stretch.start + a))
        at = b
    if chain.length - at > 1e-6:
        out.append(replace(stretch, line=chain.piece(at, chain.length), start=stretch.start + at))
    return out


class OpenChain(Chain):
    """An open line by metres along it."""

    def __init__(self, line: LineString):
        super().__init__(shapely.get_coordinates(line))

    def points(self, s: NDArray[np.float64]) -> NDArray[np.float64]:
        """Points (n, 2) at metres `s`."""
        return self._between(s)

    def piece(self, s0: float, s1: float) -> LineString:
        """The line from metre s0 to s1."""
        inner = (self.s > s0 + 1e-6) & (self.s < s1 - 1e-6)
        ends = self.points(np.array([s0, s1]))
        return LineString(np.concatenate([ends[:1], self.xy[inner], ends[1:]]))

    def frame(self, s: float) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Point and unit direction at metre `s`."""
        k = int(np.clip(np.searchsorted(self.s, s, side="right") - 1, 0, len(self.xy) - 2))
        d = self.xy[k + 1] - self.xy[k]
        return self.points(np.array([s]))[0], d / np.hypot(*d)
