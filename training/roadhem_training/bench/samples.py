"""Points along lines, and how they lie to other lines."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray

from roadhem.accuracy.intervals import Segments

STEP_M = 0.10
_HALF_CHORD_M = 0.25
"""A heading is that of the chord this far to either side."""

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Samples:
    """Middles of equal pieces of lines.

    Attributes
    ----------
    xy : (n, 2) metres. heading : (n,) radians from east. line : (n,) index of the line. along : (n,) metres from its
    start. weight : (n,) length of the piece, metres.
    """

    xy: Floats
    heading: Floats
    line: NDArray[np.int64]
    along: Floats
    weight: Floats

    def pick(self, chosen: NDArray[Any]) -> Samples:
        """Return the chosen ones."""
        return Samples(*(getattr(self, name)[chosen] for name in ("xy", "heading", "line", "along", "weight")))


@dataclass(frozen=True)
class Nearest:
    """The nearest point of other lines. distance : (n,) metres, inf where there are none; line : (n,) index, -1.

    turn : (n,) radians between the axes, 0..pi/2.
    """

    distance: Floats
    line: NDArray[np.int64]
    turn: Floats


def along_lines(lines: NDArray[Any], step_m: float = STEP_M) -> Samples:
    """Cut each line into equal pieces of at most `step_m` and return their middles."""
    length = shapely.length(lines)
    count = np.where(length > 0, np.maximum(np.ceil(length / step_m), 1), 0).astype(np.int64)
    line = np.repeat(np.arange(len(lines)), count)
    rank = np.arange(count.sum()) - np.repeat(np.cumsum(count) - count, count)
    weight = np.repeat(length / np.maximum(count, 1), count)
    along = (rank + 0.5) * weight
    chain = _Chain.of(lines)
    chord = chain.at(line, along + _HALF_CHORD_M) - chain.at(line, along - _HALF_CHORD_M)
    return Samples(chain.at(line, along), np.arctan2(chord[:, 1], chord[:, 0]), line, along, weight)


@dataclass(frozen=True)
class _Chain:
    """Vertices of all lines one after another, with the metres before each."""

    xy: Floats
    before: Floats
    first: NDArray[np.int64]

    @classmethod
    def of(cls, lines: NDArray[Any]) -> _Chain:
        xy, line = shapely.get_coordinates(lines, return_index=True)
        before = np.append(0.0, np.cumsum(np.hypot(*np.diff(xy, axis=0).T)))
        return cls(xy, before[: len(xy)], np.searchsorted(line, np.arange(len(lines) + 1)))

    def at(self, line: NDArray[np.int64], along: Floats) -> Floats:
        """Places along lines, kept between their ends."""
        low, high = self.before[self.first[line]], self.before[self.first[line + 1] - 1]
        way = np.clip(low + along, low, high)
        segment = np.clip(np.searchsorted(self.before, way), self.first[line] + 1, self.first[line + 1] - 1)
        start, length = self.before[segment - 1], self.before[segment] - self.before[segment - 1]
        share = np.divide(way - start, length, out=np.zeros(len(way)), where=length > 0)[:, None]
        return (1 - share) * self.xy[segment - 1] + share * self.xy[segment]


def nearest(samples: Samples, lines: NDArray[Any]) -> Nearest:
    """Find the nearest point of `lines` for each sample."""
    pieces = Segments.of(lines)
    count = len(samples.line)
    if not len(pieces.line) or not count:
        return Nearest(np.full(count, np.inf), np.full(count, -1), np.zeros(count))
    tree = shapely.STRtree(pieces.shapes)
    (_, at), distance = tree.query_nearest(shapely.points(samples.xy), all_matches=False, return_distance=True)
    axis = np.arctan2(*(pieces.end - pieces.start)[at].T[::-1])
    turn = np.abs((samples.heading - axis + np.pi / 2) % np.pi - np.pi / 2)
    return Nearest(distance, pieces.line[at], turn)


def runs_of(mark: NDArray[np.bool_], line: NDArray[np.int64], weight: Floats, least_m: float) -> NDArray[np.bool_]:
    """Keep the marked runs, within one line, that are at least `least_m` long."""
    if not len(mark):
        return mark
    fresh = np.append(True, (mark[1:] != mark[:-1]) | (line[1:] != line[:-1]))
    run = np.cumsum(fresh) - 1
    length = np.bincount(run, weights=weight)
    return mark & (length[run] >= least_m - 1e-9)

