"""Welding: a rest that an overlap left goes on where another line ends, so both become one line."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
import shapely
from numpy.typing import NDArray

from roadhem.tracing.result import Trace

REACH_M = 0.75
"""Farthest from a line's end that its continuation may begin: a step of the tracer and the overlap's tolerance."""
BLEND_M = 0.8
"""A sideways jump at a weld is spread over at least this length."""
STRAIGHT = 40.0
"""Degrees of turn over a weld up to which it is one edge."""


@dataclass(frozen=True)
class Piece:
    """A trace or a part of one.

    Attributes
    ----------
    trace : the part.
    cut_start, cut_end : whether an overlap cut it there.
    """

    trace: Trace
    cut_start: bool = False
    cut_end: bool = False


def weld(pieces: Sequence[Piece]) -> list[Trace]:
    """Join ends that were cut to the starts they meet, and the other way round; all others stay as they are."""
    open_ = [index for index, piece in enumerate(pieces) if not piece.trace.closed]
    follows = _followers(pieces, open_)
    led = set(follows.values())
    lines = [piece.trace for piece in pieces if piece.trace.closed]
    done: set[int] = set()
    for head in [index for index in open_ if index not in led] + open_:
        if head in done:
            continue
        chain, looped = _chain(head, follows)
        done.update(chain)
        lines.append(_concatenate([pieces[index].trace for index in chain], looped))
    return lines


def _chain(head: int, follows: dict[int, int]) -> tuple[list[int], bool]:
    chain, after = [head], follows.get(head)
    while after is not None and after != head:
        chain.append(after)
        after = follows.get(after)
    return chain, after == head


def _followers(pieces: Sequence[Piece], open_: Sequence[int]) -> dict[int, int]:
    """For each piece the one that continues it, nearest pairs first, each end used once."""
    if not open_:
        return {}
    starts = np.array([pieces[index].trace.points[0] for index in open_])
    ends = np.array([pieces[index].trace.points[-1] for index in open_])
    tree = shapely.STRtree(shapely.points(starts))
    end, start = tree.query(shapely.points(ends), predicate="dwithin", distance=REACH_M)
    pairs = []
    for a, b in zip(end, start, strict=True):
        before, after = pieces[open_[a]], pieces[open_[b]]
        if (before.cut_end or after.cut_start) and _straight(before.trace, after.trace):
            gap = float(np.hypot(*(ends[a] - starts[b])))
            pairs.append((gap, tuple(ends[a]), tuple(starts[b]), open_[a], open_[b]))
    follows: dict[int, int] = {}
    led: set[int] = set()
    for *_, before_index, after_index in sorted(pairs):
        if before_index not in follows and after_index not in led:
            follows[before_index] = after_index
            led.add(after_index)
    return follows


def _straight(before: Trace, after: Trace) -> bool:
    u, v = _heading(before.points[-4:]), _heading(after.points[:4])
    return bool(np.degrees(np.abs(np.angle(np.exp(1j * (u - v))))) <= STRAIGHT)


def _heading(points: NDArray[np.float64]) -> float:
    step = points[-1] - points[0]
    return float(np.arctan2(step[1], step[0]))


def _concatenate(traces: Sequence[Trace], looped: bool) -> Trace:
    """Lay traces end to end; whoever comes after a weld gives up points too close to it."""
    if len(traces) == 1 and not looped:
        return traces[0]
    parts = [traces[0], *(_blended(before, after) for before, after in pairwise(traces))]
    if looped:
        parts.append(_first_point(parts[0]))
    return replace(
        traces[0],
        points=np.concatenate([part.points for part in parts]),
        sigma=np.concatenate([part.sigma for part in parts]),
        kind=np.concatenate([part.kind for part in parts]),
        seen=np.concatenate([part.seen for part in parts]),
        closed=looped,
        start_reason="looped" if looped else traces[0].start_reason,
        end_reason="looped" if looped else traces[-1].end_reason,
        doubts=tuple(doubt for trace in traces for doubt in trace.doubts),
    )


def _blended(before: Trace, after: Trace) -> Trace:
    far = np.hypot(*(after.points - before.points[-1]).T) >= BLEND_M
    first = min(int(np.argmax(far)) if far.any() else 0, len(after.points) - 1)
    return replace(
        after,
        points=after.points[first:],
        sigma=after.sigma[first:],
        kind=after.kind[first:],
        seen=after.seen[first:],
    )


def _first_point(trace: Trace) -> Trace:
    return replace(trace, points=trace.points[:1], sigma=trace.sigma[:1], kind=trace.kind[:1], seen=trace.seen[:1])
