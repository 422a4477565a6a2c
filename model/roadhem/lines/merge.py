"""One line per real edge: traces of the same edge are merged by choosing, never by averaging.

The outcome depends on the traces alone, not on their order or number of workers:

1. Traces that cover each other are one edge; of them the one with the lower median spread is kept, then the one
   whose coordinates sort first.
2. Where traces overlap in part, the longer is kept whole (then by spread and coordinates) and of the other only
   what it alone has, if that is at least REST_M long.
3. Such a rest is welded to the line whose end it continues, so that one edge stays one line.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import shapely
from numpy.typing import NDArray

from roadhem.lines.weld import Piece, weld
from roadhem.tracing.result import Doubt, Trace

SAME_M = 0.15
"""Lines this close to each other, and alike in heading, are the same edge."""
SAME_HEADING = 30.0
"""Degrees between axes up to which they count as alike."""
REST_M = 2.0
"""Shorter rests of an overlapping trace are dropped."""


@dataclass(frozen=True)
class Merged:
    """The outcome.

    Attributes
    ----------
    traces : one per real edge, in an order that depends on their coordinates alone.
    edge_of : for each input trace, the index into `traces` of the edge that its seed gave.
    """

    traces: list[Trace]
    edge_of: list[int]


def merge(traces: Sequence[Trace], seeds: NDArray[np.float64]) -> Merged:
    """Merge traces, each made from one seed.

    Parameters
    ----------
    traces : any order.
    seeds : (n, 2) grid metres, the place each trace was asked for.
    """
    if not traces:
        return Merged([], [])
    cover = _Cover(traces)
    distinct = _distinct(traces, cover)
    pieces = _cut(traces, cover, sorted(distinct, key=lambda i: (-_length(traces[i]), _rank(traces[i]))))
    lines = sorted(weld(pieces), key=_coordinates)
    tree = shapely.STRtree([shapely.LineString(line.points) for line in lines])
    _, nearest = tree.query_nearest(shapely.points(_on_trace(traces, seeds)), all_matches=False)
    return Merged(lines, [int(index) for index in nearest])


class _Cover:
    """Which points of each trace lie on which other traces."""

    def __init__(self, traces: Sequence[Trace]) -> None:
        self._traces = traces
        counts = np.array([len(trace.points) - 1 for trace in traces])
        self._first = np.cumsum(counts) - counts
        self._owner = np.repeat(np.arange(len(traces)), counts)
        self._axis = np.concatenate([_axis(trace.points) for trace in traces])
        self._alive = np.ones(len(self._owner), dtype=bool)
        self._tree = shapely.STRtree(np.concatenate([shapely.linestrings(_segments(t.points)) for t in traces]))

    def drop(self, index: int, points: NDArray[np.bool_]) -> None:
        """Let the given points of a trace cover nothing from now on."""
        first = self._first[index]
        self._alive[first : first + len(points) - 1] &= ~(points[:-1] | points[1:])

    def of(self, index: int) -> dict[int, NDArray[np.bool_]]:
        """For every other trace that touches trace `index`: which of the latter's points it covers."""
        points = self._traces[index].points
        point, segment = self._tree.query(shapely.points(points), predicate="dwithin", distance=SAME_M)
        live = self._alive[segment]
        point, segment = point[live], segment[live]
        own_axis = _axis(points)
        last = len(own_axis) - 1
        alike = np.zeros(len(point), dtype=bool)
        for side in (0, -1):
            other = self._axis[segment]
            turn = np.abs(own_axis[np.clip(point + side, 0, last)] - other) % np.pi
            alike |= np.minimum(turn, np.pi - turn) <= np.radians(SAME_HEADING)
        point, owner = point[alike], self._owner[segment[alike]]
        masks: dict[int, NDArray[np.bool_]] = {}
        for other_index in np.unique(owner):
            if other_index != index:
                mask = np.zeros(len(points), dtype=bool)
                mask[point[owner == other_index]] = True
                masks[int(other_index)] = mask
        return masks


def _distinct(traces: Sequence[Trace], cover: _Cover) -> list[int]:
    """Keep of equal traces the best; return the indices kept."""
    inside = [
        {other for other, mask in cover.of(index).items() if not _rests(trace, mask)}
        for index, trace in enumerate(traces)
    ]
    kept: set[int] = set()
    for index in sorted(range(len(traces)), key=lambda i: _rank(traces[i])):
        if not any(other in kept and index in inside[other] for other in inside[index]):
            kept.add(index)
    return sorted(kept)


def _cut(traces: Sequence[Trace], cover: _Cover, order: Sequence[int]) -> list[Piece]:
    """Take traces in order, of each what no earlier one covers."""
    pieces: list[Piece] = []
    taken: set[int] = set()
    for index in order:
        trace = traces[index]
        covered = np.zeros(len(trace.points), dtype=bool)
        for other, mask in cover.of(index).items():
            if other in taken:
                covered |= mask
        taken.add(index)
        if not covered.any():
            pieces.append(Piece(trace))
            continue
        rests = [_piece(trace, start, stop) for start, stop in _rests(trace, covered)]
        pieces += rests
        cover.drop(index, _left_over(trace, covered, rests))
    return pieces


def _left_over(trace: Trace, covered: NDArray[np.bool_], rests: Sequence[Piece]) -> NDArray[np.bool_]:
    """Points in rests too short to keep."""
    kept = {point.tobytes() for rest in rests for point in rest.trace.points}
    return ~covered & np.array([point.tobytes() not in kept for point in trace.points])


def _piece(trace: Trace, start: int, stop: int) -> Piece:
    """Take the points start..stop of a trace as a piece of its own."""
    last = len(trace.points) - 1
    wanted = np.arange(start, stop + 1) % (last if trace.closed else last + 1)
    cut_start, cut_end = start > 0 or trace.closed, stop < last or trace.closed
    part = replace(
        trace,
        points=trace.points[wanted],
        sigma=trace.sigma[wanted],
        kind=trace.kind[wanted],
        seen=trace.seen[wanted],
        closed=False,
        start_reason="met_edge" if cut_start else trace.start_reason,
        end_reason="met_edge" if cut_end else trace.end_reason,
        doubts=_doubts_on(trace, wanted),
    )
    return Piece(part, cut_start, cut_end)


def _doubts_on(trace: Trace, wanted: NDArray[np.int64]) -> tuple[Doubt, ...]:
    if not trace.doubts:
        return ()
    places = shapely.points([(doubt.x, doubt.y) for doubt in trace.doubts])
    nearest = shapely.STRtree(shapely.points(trace.points)).nearest(places)
    inside = set(wanted.tolist())
    return tuple(doubt for doubt, point in zip(trace.doubts, nearest, strict=True) if int(point) in inside)


def _rests(trace: Trace, covered: NDArray[np.bool_]) -> list[tuple[int, int]]:
    """Runs of uncovered points at least REST_M long, as first and last index; on a loop the last may wrap."""
    count = len(covered) - 1 if trace.closed else len(covered)
    free = ~covered[:count]
    if free.all():
        return [(0, len(covered) - 1)]
    first = 0
    if trace.closed and free[0]:
        first = int(np.flatnonzero(~free)[-1]) + 1
    turned = np.roll(free, -first)
    edges = np.flatnonzero(np.diff(np.concatenate([[0], turned.astype(np.int8), [0]])))
    runs = [(first + int(a), first + int(b) - 1) for a, b in zip(edges[::2], edges[1::2], strict=True)]
    return [run for run in runs if _run_length(trace.points, run, count) >= REST_M]


def _run_length(points: NDArray[np.float64], run: tuple[int, int], count: int) -> float:
    wanted = points[np.arange(run[0], run[1] + 1) % count]
    return float(np.hypot(*np.diff(wanted, axis=0).T).sum())


def _on_trace(traces: Sequence[Trace], seeds: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the place on each trace nearest to its seed."""
    shapes = np.array([shapely.LineString(trace.points) for trace in traces])
    places = shapely.line_interpolate_point(shapes, shapely.line_locate_point(shapes, shapely.points(seeds)))
    return np.asarray(shapely.get_coordinates(places))


def _rank(trace: Trace) -> tuple[float, bytes]:
    return float(np.round(np.median(trace.sigma), 6)), trace.points.tobytes()


def _coordinates(trace: Trace) -> tuple[float, ...]:
    return (*trace.points[0].tolist(), *trace.points[-1].tolist(), *trace.points[1].tolist())


def _length(trace: Trace) -> float:
    return float(np.round(np.hypot(*np.diff(trace.points, axis=0).T).sum(), 3))


def _segments(points: NDArray[np.float64]) -> NDArray[np.float64]:
    return np.stack([points[:-1], points[1:]], axis=1)


def _axis(points: NDArray[np.float64]) -> NDArray[np.float64]:
    step = np.diff(points, axis=0)
    return np.arctan2(step[:, 1], step[:, 0])
