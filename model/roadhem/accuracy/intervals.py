"""Which parts of lines lie within a distance of other lines: exact, by intersecting segments with capsules.

All points within b of a segment form a capsule (a round-capped buffer). A capsule is convex, so it cuts any other
segment in one interval, which has a closed form. The union of these intervals over all near segments is exactly the
matched part; no buffer polygon is built and nothing is sampled.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Segments:
    """The straight pieces of a set of lines, in metres.

    Attributes
    ----------
    start, end : (n, 2).
    line : (n,) index of the line each belongs to; pieces of one line follow each other in its order.
    """

    start: Floats
    end: Floats
    line: NDArray[np.int64]

    @classmethod
    def of(cls, lines: NDArray[Any]) -> Segments:
        """Cut lines (LineStrings, MultiLineStrings; others count as nothing) into segments of some length."""
        parts, line = shapely.get_parts(lines, return_index=True)
        coordinates, part = shapely.get_coordinates(parts, return_index=True)
        same = part[1:] == part[:-1]
        start, end = coordinates[:-1][same], coordinates[1:][same]
        long = (start != end).any(axis=1)
        return cls(start[long], end[long], np.asarray(line[part[:-1][same]][long], dtype=np.int64))

    @property
    def length(self) -> Floats:
        """Length of each, (n,)."""
        return np.hypot(*(self.end - self.start).T)

    @property
    def shapes(self) -> NDArray[Any]:
        """As shapely LineStrings, (n,)."""
        return shapely.linestrings(np.stack([self.start, self.end], axis=1))


@dataclass(frozen=True)
class Spans:
    """Disjoint intervals along segments, sorted by segment and place.

    Attributes
    ----------
    segment : (k,) index into the Segments.
    low, high : (k,) metres from the segment's start.
    """

    segment: NDArray[np.int64]
    low: Floats
    high: Floats

    @property
    def length(self) -> float:
        """Their total length, metres."""
        return float((self.high - self.low).sum())


def within(these: Segments, others: Segments, distance: float, heading_limit: float | None = None) -> Spans:
    """Return the parts of `these` within `distance` of `others`.

    Parameters
    ----------
    distance : metres, true point-to-segment distance.
    heading_limit : degrees; pairs whose axes (undirected) differ by more do not match.
    """
    if not len(these.line) or not len(others.line):
        return whole(these, np.zeros(len(these.line), dtype=bool))
    tree = shapely.STRtree(others.shapes)
    one, other = tree.query(these.shapes, predicate="dwithin", distance=distance)
    if heading_limit is not None:
        alike = _axis_difference(these, others, one, other) <= heading_limit
        one, other = one[alike], other[alike]
    low, high = _capsule_cut(these, others, one, other, distance)
    some = high > low
    return union(one[some], low[some], high[some])


def whole(these: Segments, chosen: NDArray[np.bool_]) -> Spans:
    """Return the chosen segments in full."""
    index = np.flatnonzero(chosen)
    return Spans(index, np.zeros(len(index)), these.length[index])


def union(segment: NDArray[np.int64], low: Floats, high: Floats) -> Spans:
    """Merge overlapping intervals of the same segment."""
    if not len(segment):
        return Spans(np.empty(0, np.int64), np.empty(0), np.empty(0))
    order = np.lexsort((low, segment))
    segment, low, high = segment[order], low[order], high[order]
    reach = _running_reach(segment, high)
    fresh = np.ones(len(segment), dtype=bool)
    fresh[1:] = (segment[1:] != segment[:-1]) | (low[1:] > reach[:-1])
    last = np.flatnonzero(np.append(fresh[1:], True))
    return Spans(segment[fresh], low[fresh], reach[last])


def subtract(these: Spans, others: Spans) -> Spans:
    """Return the parts of `these` that `others` leave."""
    segment = np.concatenate([these.segment, others.segment])
    edge = np.concatenate([np.stack([these.low, these.high], 1), np.stack([others.low, others.high], 1)])
    place, owner = edge.ravel(), np.repeat(segment, 2)
    mine = np.repeat(np.arange(len(segment)) < len(these.segment), 2)
    step = np.tile([1, -1], len(segment))
    order = np.lexsort((place, owner))
    place, owner = place[order], owner[order]
    inside = np.cumsum(np.where(mine, step, 0)[order]) > 0
    barred = np.cumsum(np.where(mine, 0, step)[order]) > 0
    left = np.flatnonzero((inside & ~barred)[:-1] & (place[1:] > place[:-1]) & (owner[1:] == owner[:-1]))
    return union(owner[left], place[left], place[left + 1])


def intersect(these: Spans, others: Spans) -> Spans:
    """Return the parts that both hold."""
    return subtract(these, subtract(these, others))


def _running_reach(segment: NDArray[np.int64], high: Floats) -> Floats:
    """Largest `high` so far within each segment's run; segments are sorted."""
    rank = np.cumsum(np.append(True, segment[1:] != segment[:-1]))
    lift = rank * (high.max() - high.min() + 1.0)
    return np.maximum.accumulate(high + lift) - lift


def _axis_difference(a: Segments, b: Segments, i: NDArray[np.int64], j: NDArray[np.int64]) -> Floats:
    u, v = (a.end - a.start)[i], (b.end - b.start)[j]
    cross = np.abs(u[:, 0] * v[:, 1] - u[:, 1] * v[:, 0])
    return np.degrees(np.arctan2(cross, np.abs((u * v).sum(axis=1))))


def _capsule_cut(
    these: Segments, others: Segments, one: NDArray[np.int64], other: NDArray[np.int64], radius: float
) -> tuple[Floats, Floats]:
    """Interval of each segment `one` inside the capsule around `other`, in metres; low > high where there is none.

    The capsule is the hull of two discs and the rectangle between them, and the cut of a convex set is the span
    of the cuts of these three.
    """
    length = these.length[one]
    direction = (these.end - these.start)[one] / length[:, None]
    origin = these.start[one]
    cuts = [_disc_cut(origin, direction, centre[other], radius) for centre in (others.start, others.end)]
    cuts.append(_strip_cut(origin, direction, others.start[other], others.end[other], radius))
    low = np.min([cut[0] for cut in cuts], axis=0)
    high = np.max([cut[1] for cut in cuts], axis=0)
    return np.maximum(low, 0.0), np.minimum(high, length)


def _disc_cut(origin: Floats, direction: Floats, centre: Floats, radius: float) -> tuple[Floats, Floats]:
    to_centre = centre - origin
    foot = (to_centre * direction).sum(axis=1)
    aside = to_centre[:, 0] * direction[:, 1] - to_centre[:, 1] * direction[:, 0]
    inside = radius**2 - aside**2
    half = np.sqrt(np.maximum(inside, 0.0))
    hit = inside >= 0
    return np.where(hit, foot - half, np.inf), np.where(hit, foot + half, -np.inf)


def _strip_cut(origin: Floats, direction: Floats, a: Floats, b: Floats, radius: float) -> tuple[Floats, Floats]:
    """Cut of the rectangle that spans from a to b, `radius` to either side."""
    span = np.hypot(*(b - a).T)
    axis = (b - a) / span[:, None]
    side = np.stack([-axis[:, 1], axis[:, 0]], axis=1)
    rel = origin - a
    along = _slab((rel * axis).sum(axis=1), (direction * axis).sum(axis=1), np.zeros(len(span)), span)
    across = _slab((rel * side).sum(axis=1), (direction * side).sum(axis=1), -radius, radius)
    low, high = np.maximum(along[0], across[0]), np.minimum(along[1], across[1])
    hit = high >= low
    return np.where(hit, low, np.inf), np.where(hit, high, -np.inf)


def _slab(at: Floats, speed: Floats, bottom: Floats | float, top: Floats | float) -> tuple[Floats, Floats]:
    """Interval of t in which bottom <= at + t * speed <= top."""
    still = np.abs(speed) < 1e-12
    safe = np.where(still, 1.0, speed)
    one, two = (bottom - at) / safe, (top - at) / safe
    inside = (at >= bottom) & (at <= top)
    low = np.where(still, np.where(inside, -np.inf, np.inf), np.minimum(one, two))
    high = np.where(still, np.where(inside, np.inf, -np.inf), np.maximum(one, two))
    return low, high
