"""The drawn edges of a set in grid metres, and the whole edges they are pieces of."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pyogrio
import pyproj
import shapely
from numpy.typing import NDArray

from roadhem.jobs.measure import UNSCORED
from roadhem.lines.vectors import Layer, read_layer, to_crs
from roadhem.tiles.grid import WorkingGrid
from roadhem_training.bench.sets import OTHERS, TRUTH, BenchSet

HIDDEN = "hidden"
MARKING = "marking"
AREAS = "areas"
TOUCH_M = 0.05
"""Ends of pieces this close are the same place."""

Lines = NDArray[Any]


@dataclass(frozen=True)
class Truth:
    """Pieces of drive-over edge, each of one kind and seen in one way.

    Attributes
    ----------
    lines : (n,) LineStrings, grid metres.
    kind : (n,) as the set names it. sight : (n,) "seen", "shadow", "hidden"; what the set says where it knows less.
    scored : (n,) False where a person could not judge.
    areas : in which every edge is drawn; None for everywhere.
    markings : lane lines and the like, if the set tells.
    """

    lines: Lines
    kind: NDArray[Any]
    sight: NDArray[Any]
    scored: NDArray[np.bool_]
    areas: Any
    markings: Lines

    def contains(self, xy: NDArray[np.float64]) -> NDArray[np.bool_]:
        """Tell which places (n, 2) lie in the areas."""
        if self.areas is None or not len(xy):
            return np.ones(len(xy), dtype=bool)
        shapely.prepare(self.areas)
        return shapely.contains_xy(self.areas, *xy.T)

    def whole_edges(self, across_hidden: bool = False) -> Lines:
        """Pieces inside the areas joined where they go on: the visible ones, or all of edges that show somewhere."""
        visible = self.lines[self.scored]
        if not across_hidden:
            return joined(clipped(visible, self.areas))
        edges = joined(clipped(self.lines, self.areas))
        shown = shapely.STRtree(visible).query(edges, predicate="dwithin", distance=TOUCH_M)[0]
        return edges[np.unique(shown)]


def read_truth(bench_set: BenchSet, crs: pyproj.CRS, grid: WorkingGrid) -> Truth:
    """Read a set's truth and bring it to grid metres."""
    source = str(bench_set.folder / TRUTH)
    edges = read_layer(f"{source}:edges", "edges")
    lines, row = shapely.get_parts(_in_metres(edges, crs, grid), return_index=True)
    visible = edges.columns["visible"][row]
    sight = edges.columns["seen"][row] if "seen" in edges.columns else visible
    areas = None
    if AREAS in pyogrio.list_layers(source)[:, 0]:
        areas = shapely.union_all(_in_metres(read_layer(f"{source}:{AREAS}", AREAS), crs, grid))
    return Truth(
        lines, edges.columns["kind"][row], sight, ~np.isin(visible, UNSCORED), areas, _markings(bench_set, crs, grid)
    )


def joined(lines: Lines, directed: bool = True) -> Lines:
    """Join lines where exactly two meet, end to start if `directed`."""
    merged = shapely.line_merge(shapely.multilinestrings(shapely.get_parts(lines)), directed=directed)
    return shapely.get_parts(merged)


def clipped(lines: Lines, areas: Any) -> Lines:
    """Return the parts of lines inside the areas."""
    if areas is None:
        return lines
    parts = shapely.get_parts(shapely.intersection(lines, areas))
    return parts[(shapely.get_dimensions(parts) == 1) & (shapely.length(parts) > 0)]


def _markings(bench_set: BenchSet, crs: pyproj.CRS, grid: WorkingGrid) -> Lines:
    path = bench_set.folder / OTHERS
    if not path.exists():
        return np.empty(0, dtype=object)
    others = read_layer(str(path), "others")
    return _in_metres(others, crs, grid)[others.columns["what"] == MARKING]


def _in_metres(layer: Layer, crs: pyproj.CRS, grid: WorkingGrid) -> Lines:
    return np.asarray(shapely.transform(to_crs(layer, crs), grid.to_metres), dtype=object)
