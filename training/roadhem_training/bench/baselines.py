"""Two baselines from scikit-image on the same fields: a minimal path between two clicks, and threshold + skeleton."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray
from scipy.ndimage import uniform_filter1d
from skimage.graph import MCP_Geometric
from skimage.morphology import skeletonize

from roadhem.fields.layout import CELL_M, NET_FIELDS, QUANTUM
from roadhem.jobs.session import PAGE, Session, page_of
from roadhem_training.bench.samples import Floats
from roadhem_training.bench.truth import Lines, joined

_NEARNESS = NET_FIELDS.index("nearness")
_QUANTUM = QUANTUM.get("nearness", 1e-4)

PIECE_M = 40.0
"""Longest edge between a start and an end click."""
MARGIN_M = 10.0
"""How far a path may leave the box around its two clicks."""


@dataclass(frozen=True)
class Nearness:
    """The net's nearness over a set.

    Attributes
    ----------
    values : (h, w) 0..1, row 0 north. top, left : row and column of its first cell on the field grid.
    """

    values: NDArray[np.float32]
    top: int
    left: int

    @classmethod
    def of(cls, session: Session) -> Nearness:
        """Put together the pages of a set's tiles."""
        minx, miny, maxx, maxy = session.bounds_m
        (p0, q0), (p1, q1) = page_of(minx, maxy), page_of(maxx, miny)
        rows = [
            np.hstack([session.fields(p, q)[..., _NEARNESS] for q in range(q0, q1 + 1)]) for p in range(p0, p1 + 1)
        ]
        return cls(np.vstack(rows).astype(np.float32) * np.float32(_QUANTUM), p0 * PAGE, q0 * PAGE)

    def cells(self, xy: Floats) -> NDArray[np.int64]:
        """Rows and columns (n, 2) of places in grid metres, kept inside."""
        cell = np.floor(np.stack([-xy[:, 1], xy[:, 0]], axis=1) / CELL_M).astype(np.int64) - (self.top, self.left)
        return np.clip(cell, 0, np.array(self.values.shape) - 1)

    def places(self, cells: NDArray[Any]) -> Floats:
        """Middles of cells (n, 2) in grid metres."""
        row, col = np.asarray(cells, dtype=float).reshape(-1, 2).T
        return np.stack([(col + self.left + 0.5) * CELL_M, -(row + self.top + 0.5) * CELL_M], axis=1)


@dataclass(frozen=True)
class PathSettings:
    """Cost of a cell: floor + (1 - nearness) ** power; the path is smoothed by a running mean of `smooth` cells."""

    floor: float
    power: float
    smooth: int

    def __str__(self) -> str:
        return f"cost {self.floor:g} + (1 − nearness)^{self.power:g}, mean of {self.smooth} cells"


@dataclass(frozen=True)
class SkeletonSettings:
    """Cells with more than `threshold` nearness are thinned; lines shorter than `least_m` are dropped."""

    threshold: float
    least_m: float

    def __str__(self) -> str:
        return f"nearness > {self.threshold:g}, lines from {self.least_m:g} m"


PATH_TRIED = [PathSettings(floor, power, smooth) for floor, power, smooth in (
    (0.1, 1, 1), (0.1, 2, 1), (0.02, 2, 1), (0.02, 2, 5), (0.02, 4, 5), (0.005, 4, 5),
)]  # fmt: skip
SKELETON_TRIED = [SkeletonSettings(t, least) for t, least in (
    (0.5, 2), (0.65, 2), (0.8, 2), (0.65, 5), (0.8, 5), (0.9, 2),
)]  # fmt: skip


def minimal_paths(near: Nearness, edges: Lines, settings: PathSettings) -> Lines:
    """Trace each edge from exact clicks at both ends of its pieces, which are equal and at most PIECE_M long."""
    paths = []
    for edge in edges:
        count = int(np.ceil(edge.length / PIECE_M))
        clicks = shapely.get_coordinates(shapely.line_interpolate_point(edge, np.linspace(0, edge.length, count + 1)))
        paths += [minimal_path(near, clicks[n : n + 2], settings) for n in range(count)]
    return np.array(paths, dtype=object)


def click_count(edges: Lines) -> int:
    """Clicks that `minimal_paths` takes: neighbouring pieces share one."""
    return int(sum(np.ceil(shapely.length(edges) / PIECE_M) + 1))


def minimal_path(near: Nearness, clicks: Floats, settings: PathSettings) -> Any:
    """Cheapest path of cells between two clicks (2, 2), from click to click."""
    cells = near.cells(clicks)
    margin = round(MARGIN_M / CELL_M)
    low = np.maximum(cells.min(axis=0) - margin, 0)
    high = cells.max(axis=0) + margin + 1
    cost = settings.floor + (1 - near.values[low[0] : high[0], low[1] : high[1]].astype(float)) ** settings.power
    finder = MCP_Geometric(cost)
    finder.find_costs([tuple(cells[0] - low)], [tuple(cells[1] - low)])
    path = near.places(np.array(finder.traceback(tuple(cells[1] - low))) + low)
    smoothed = uniform_filter1d(path, settings.smooth, axis=0, mode="nearest")
    return shapely.LineString(np.concatenate([clicks[:1], smoothed, clicks[1:]]))


def skeleton_lines(near: Nearness, settings: SkeletonSettings) -> Lines:
    """Thin the cells above the threshold and join their middles."""
    lines = joined_cells(near, skeletonize(near.values > settings.threshold))
    return lines[shapely.length(lines) >= settings.least_m]


def joined_cells(near: Nearness, thin: NDArray[np.bool_]) -> Lines:
    """Join neighbouring cells of a skeleton to lines; a diagonal only where no corner cell joins them already."""
    padded = np.pad(thin, 1)
    pairs = []
    for down, right in ((0, 1), (1, 0), (1, 1), (1, -1)):
        other = np.roll(padded, (-down, -right), axis=(0, 1))
        both = padded & other
        if down and right:
            corners = np.roll(padded, -down, axis=0) | np.roll(padded, -right, axis=1)
            both &= ~corners
        start = np.argwhere(both) - 1
        pairs.append(np.stack([start, start + np.array([down, right])], axis=1))
    ends = np.concatenate(pairs)
    if not len(ends):
        return np.empty(0, dtype=object)
    return joined(shapely.linestrings(near.places(ends.reshape(-1, 2)).reshape(-1, 2, 2)), directed=False)
