"""Alignments: the axis of a road as a polyline with stations, and the strips and bends made from it."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry import LineString, MultiPolygon, Polygon

Points = NDArray[np.float64]
Offset = float | Callable[[Points], Points]

CLOSEST = 0.05  # metres between stations of an offset curve; nearer ones could fold back on each other
CHORD_ERROR = 0.003  # how far a chord of an axis may lie off its arc, metres


def arc_step(radius: float, error: float = CHORD_ERROR) -> float:
    """Angle in radians whose chord on `radius` (metres) lies `error` metres off the arc at its middle."""
    return 2.0 * math.acos(max(0.0, 1.0 - error / max(radius, 2.0 * error)))


def quad_segments(radius: float) -> int:
    """Segments per quarter circle that keep an arc of `radius` metres within CHORD_ERROR."""
    return max(8, math.ceil(0.5 * math.pi / arc_step(radius)))


class Alignment:
    """A polyline with stations (metres along it); offsets are positive to the left.

    Parameters
    ----------
    xy : (n, 2) vertices in metres, n >= 2, no two successive ones equal.
    """

    def __init__(self, xy: Points):
        xy = np.asarray(xy, dtype=np.float64)
        step = np.hypot(*np.diff(xy, axis=0).T)
        keep = np.concatenate([[True], step > 1e-9])
        self.xy = xy[keep]
        delta = np.diff(self.xy, axis=0)
        length = np.hypot(delta[:, 0], delta[:, 1])
        self.s = np.concatenate([[0.0], np.cumsum(length)])
        self.direction = delta / length[:, None]

    @property
    def length(self) -> float:
        """Metres from end to end."""
        return float(self.s[-1])

    @property
    def line(self) -> LineString:
        """The axis itself."""
        return LineString(self.xy)

    def _segment(self, s: Points) -> NDArray[np.intp]:
        k = np.searchsorted(self.s, s, side="right") - 1
        return np.minimum(np.maximum(k, 0), len(self.direction) - 1)

    def at(self, s: float | Points, offset: float | Points = 0.0) -> Points:
        """Points (…, 2) at stations `s`, `offset` metres to the left."""
        s = np.asarray(s, dtype=np.float64)
        k = self._segment(s)
        d = self.direction[k]
        normal = np.stack([-d[..., 1], d[..., 0]], axis=-1)
        along = (s - self.s[k])[..., None]
        return self.xy[k] + along * d + np.asarray(offset)[..., None] * normal

    def heading(self, s: float) -> float:
        """Direction at station `s`, radians anticlockwise from east."""
        d = self.direction[self._segment(np.asarray(s))]
        return math.atan2(d[1], d[0])

    def station(self, x: float, y: float) -> float:
        """Station of the point of the axis nearest to (x, y)."""
        return float(shapely.line_locate_point(self.line, shapely.points(x, y)))

    def parallel(self, s0: float, s1: float, offset: Offset, step: float | None = None) -> Points:
        """Vertices of the curve `offset` metres to the left of stations s0 to s1 (mitred at vertices).

        `offset` may be a function of the stations; `step` adds stations so that it is followed closely.
        """
        first, last = np.searchsorted(self.s, (s0 + CLOSEST, s1 - CLOSEST))
        s = np.concatenate([[s0], self.s[first:last], [s1]])
        if step:
            more = np.arange(s0 + step, s1 - 0.5 * step, step)
            k = np.clip(np.searchsorted(s, more), 1, len(s) - 1)
            s = np.union1d(s, more[np.minimum(more - s[k - 1], s[k] - more) > 0.3 * step])
        k = self._segment(s)
        after = self.direction[k]
        before = self.direction[np.where((s - self.s[k] < 1e-9) & (k > 0), k - 1, k)]
        mean = before + after
        scale = 1.0 / np.maximum(1.0 + (before * after).sum(axis=1), 0.4)
        d = (offset(s) if callable(offset) else offset) * scale
        out = self.xy[k] + (s - self.s[k])[:, None] * after
        out[:, 0] -= d * mean[:, 1]
        out[:, 1] += d * mean[:, 0]
        return out

    def strip(self, s0: float, s1: float, right: Offset, left: Offset, step: float | None = None) -> Polygon:
        """Area between two offsets (`right` < `left`, positive to the left) from station s0 to s1."""
        a = self.parallel(s0, s1, right, step)
        b = self.parallel(s0, s1, left, step)
        return valid(Polygon(np.concatenate([a, b[::-1]])))

    def cells(self, s0: Points, s1: Points, right: Points, left: Points) -> MultiPolygon:
        """Small four-cornered areas, one for each entry of the four arrays; right for short ones only."""
        ring = np.stack(
            [self.at(s0, right), self.at(s1, right), self.at(s1, left), self.at(s0, left)], axis=1
        )
        return MultiPolygon(list(shapely.polygons(ring)))

    def part(self, s0: float, s1: float) -> Alignment:
        """The stretch from station s0 to s1."""
        return Alignment(self.parallel(s0, s1, 0.0))


def valid(polygon: Polygon) -> Polygon:
    """`polygon`, or the largest sound piece of it where it crosses itself."""
    if polygon.is_valid:
        return polygon
    pieces = shapely.get_parts(polygon.buffer(0.0))
    return max(pieces, key=lambda p: p.area) if len(pieces) else Polygon()


def rounded(points: Sequence[tuple[float, float]], radii: Sequence[float]) -> Alignment:
    """Polyline through `points` whose inner corners are arcs of `radii` metres (shortened where legs are short)."""
    p = np.asarray(points, dtype=np.float64)
    out = [p[:1]]
    for k in range(1, len(p) - 1):
        out.append(_arc_at(p[k - 1], p[k], p[k + 1], radii[k - 1]))
    out.append(p[-1:])
    return Alignment(np.concatenate(out))


def _arc_at(a: Points, b: Points, c: Points, radius: float) -> Points:
    u, v = a - b, c - b
    lu, lv = np.hypot(*u), np.hypot(*v)
    u, v = u / lu, v / lv
    half = 0.5 * math.acos(float(np.clip(u @ v, -1, 1)))
    if half > math.pi / 2 - 1e-3:
        return b[None]
    tangent = min(radius / math.tan(half), 0.48 * min(lu, lv))
    radius = tangent * math.tan(half)
    centre = b + (u + v) / np.hypot(*(u + v)) * (radius / math.sin(half))
    start = b + tangent * u - centre
    turn = (math.pi - 2 * half) * (1.0 if u[0] * v[1] - u[1] * v[0] < 0 else -1.0)
    angles = np.linspace(0.0, turn, max(3, math.ceil(abs(turn) / arc_step(radius)) + 1))
    cos, sin = np.cos(angles), np.sin(angles)
    return centre + np.stack([cos * start[0] - sin * start[1], sin * start[0] + cos * start[1]], axis=1)


def from_curvature(
    x: float, y: float, heading: float, lengths: Sequence[float], curvatures: Sequence[float]
) -> Alignment:
    """Alignment whose curvature (1/m, left positive) runs linearly between knots: lines, clothoids and arcs.

    `curvatures` has one value more than `lengths`, the metres between its knots.
    """
    s = np.arange(0.0, float(np.sum(lengths)), 0.5)
    kappa = np.interp(s, np.concatenate([[0.0], np.cumsum(lengths)]), curvatures)
    theta = heading + np.concatenate([[0.0], np.cumsum(0.25 * (kappa[1:] + kappa[:-1]))])
    mid = 0.5 * (theta[1:] + theta[:-1])
    xy = np.array([[x, y]]) + np.stack([np.cumsum(0.5 * np.cos(mid)), np.cumsum(0.5 * np.sin(mid))], axis=1)
    line = LineString(np.concatenate([np.array([[x, y]]), xy])).simplify(0.001)
    return Alignment(shapely.get_coordinates(line))
