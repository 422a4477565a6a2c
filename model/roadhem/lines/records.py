"""Traced layers: edges with their lineage, stretches, doubts, and what became of every seed."""

from __future__ import annotations

import hashlib
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Any, Protocol

import numpy as np
import pyproj
import shapely
from numpy.typing import NDArray

from roadhem.fields.layout import KINDS, SEEN
from roadhem.lines.ground import Ground
from roadhem.lines.simplify import breaks, keep, rounded
from roadhem.lines.tables import Table
from roadhem.tiles.grid import WorkingGrid
from roadhem.tracing.result import Trace

SEED_REACH_M = 1.0
"""An edge bears the id of a seed it passes within this distance."""

SHORT_RUN_M = 1.0
"""A change of kind or visibility that lasts less is not worth a stretch of its own."""

UNSEEN = tuple(SEEN.index(name) for name in ("bridged",))

EDGE_COLUMNS = {
    "edge_id": "text",
    "seed_id": "text",
    "kind": "text",
    "length_m": "real",
    "spread_m": "real",
    "hidden_m": "real",
    "closed": "boolean",
    "level": "integer",
    "start_reason": "text",
    "end_reason": "text",
    "source": "text",
    "image_date": "text",
    "model": "text",
    "software": "text",
    "traced_at": "time",
    "author": "text",
    "reviewer": "text",
    "state": "text",
    "version": "integer",
    "valid_from": "time",
    "valid_to": "time",
    "parent_id": "text",
}
STRETCH_COLUMNS = {
    "edge_id": "text",
    "from_m": "real",
    "to_m": "real",
    "kind": "text",
    "spread_m": "real",
    "seen": "text",
}
DOUBT_COLUMNS = {"edge_id": "text", "reason": "text", "weight": "real"}
UNPLACED_COLUMNS = {"seed_id": "text", "reason": "text"}
SEED_COLUMNS = {"seed_id": "text", "edge_id": "text"}


class Sources(Protocol):
    """Says which tile lies at a place."""

    def source_at(self, x_m: float, y_m: float) -> tuple[str, str]:
        """Return name and image date ("" if unknown) of the tile at a place in grid metres."""


@dataclass(frozen=True)
class Lineage:
    """What all edges of a run have in common.

    Attributes
    ----------
    model : its name; software : name and version; traced_at : ISO 8601, UTC; author : who made the lines.
    """

    model: str
    software: str
    traced_at: str
    author: str = "roadhem"


@dataclass
class TracedLayers:
    """The layers of a traced GeoPackage, in writing order."""

    edges: Table
    stretches: Table
    doubts: Table
    unplaced: Table
    seeds: Table

    def __iter__(self) -> Any:
        return iter((self.edges, self.stretches, self.doubts, self.unplaced, self.seeds))


@dataclass(frozen=True)
class _Stretch:
    start: int
    stop: int
    kind: int
    seen: int
    spread: float


def empty_layers() -> TracedLayers:
    """Return the layers without rows."""
    return TracedLayers(
        Table("edges", "LineString", EDGE_COLUMNS),
        Table("stretches", "LineString", STRETCH_COLUMNS),
        Table("doubts", "Point", DOUBT_COLUMNS),
        Table("unplaced", "Point", UNPLACED_COLUMNS),
        Table("seeds", "Point", SEED_COLUMNS),
    )


class Recorder:
    """Turns traces into rows.

    Parameters
    ----------
    crs, grid : of the run.
    sources : names the tile at a place.
    lineage : goes into every edge.
    """

    def __init__(self, crs: pyproj.CRS, grid: WorkingGrid, sources: Sources, lineage: Lineage) -> None:
        self.layers = empty_layers()
        self._grid = grid
        self._ground = Ground(crs)
        self._sources = sources
        self._lineage = lineage

    def add_edge(self, trace: Trace, seeds: Sequence[tuple[str, NDArray[np.float64]]]) -> str:
        """Add an edge with its stretches and doubts.

        Parameters
        ----------
        seeds : ids and places (grid metres) of the seeds that gave it, the first that lies near it names it.

        Returns
        -------
        Its edge_id.
        """
        stretches = stretch_runs(trace)
        fixed = np.array([0, *(stretch.stop for stretch in stretches)], dtype=np.int64)
        kept = keep(trace.points, fixed)
        xy = rounded(self._grid.to_crs(trace.points[kept]), self._grid.scale)
        if trace.closed:
            xy[-1] = xy[0]
        edge_id = hashlib.sha256(np.ascontiguousarray(xy).tobytes()).hexdigest()[:16]
        along = np.concatenate([[0.0], np.cumsum(self._ground.step_m(xy))])
        middle = trace.points[len(trace.points) // 2]
        source, image_date = self._sources.source_at(float(middle[0]), float(middle[1]))
        self.layers.edges.add(
            shapely.LineString(xy),
            edge_id=edge_id,
            seed_id=_near_seed(trace, seeds),
            kind=KINDS[_prevailing(trace)],
            length_m=_mm(along[-1]),
            spread_m=_mm(float(np.median(trace.sigma))),
            hidden_m=self._add_stretches(edge_id, xy, along, kept, stretches),
            closed=trace.closed,
            level=0,
            start_reason=trace.start_reason,
            end_reason=trace.end_reason,
            source=source,
            image_date=image_date or None,
            model=self._lineage.model,
            software=self._lineage.software,
            traced_at=self._lineage.traced_at,
            author=self._lineage.author,
            state="traced",
            version=1,
            valid_from=self._lineage.traced_at,
        )
        for doubt in trace.doubts:
            place = rounded(self._grid.to_crs((doubt.x, doubt.y)), self._grid.scale)
            self.layers.doubts.add(
                shapely.Point(place), edge_id=edge_id, reason=doubt.reason, weight=round(doubt.weight, 3)
            )
        return edge_id

    def add_unplaced(self, seed_id: str, xy: NDArray[np.float64] | None, reason: str) -> None:
        """Add a seed that gave nothing; `xy` in the CRS, None when it has no place."""
        self.layers.unplaced.add(None if xy is None else shapely.Point(xy), seed_id=seed_id, reason=reason)

    def add_seed(self, seed_id: str, xy: NDArray[np.float64], edge_id: str) -> None:
        """Add a seed that gave an edge, maybe one that another seed names; `xy` in the CRS."""
        self.layers.seeds.add(shapely.Point(xy), seed_id=seed_id, edge_id=edge_id)

    def _add_stretches(
        self,
        edge_id: str,
        xy: NDArray[np.float64],
        along: NDArray[np.float64],
        kept: NDArray[np.int64],
        stretches: Sequence[_Stretch],
    ) -> float:
        hidden = 0.0
        for stretch in stretches:
            first, last = np.searchsorted(kept, (stretch.start, stretch.stop))
            if stretch.seen in UNSEEN:
                hidden += along[last] - along[first]
            self.layers.stretches.add(
                shapely.LineString(xy[first : last + 1]),
                edge_id=edge_id,
                from_m=_mm(along[first]),
                to_m=_mm(along[last]),
                kind=KINDS[stretch.kind],
                spread_m=_mm(stretch.spread),
                seen=SEEN[stretch.seen],
            )
        return _mm(hidden)


def stretch_runs(trace: Trace) -> list[_Stretch]:
    """Cut a trace where kind or visibility changes and every 10 m; a stretch's spread is its root mean square."""
    along = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(trace.points, axis=0).T))])
    kind = settled(trace.kind, along)
    seen = settled(trace.seen, along, lasting=UNSEEN)
    cuts = breaks(along, kind, seen)
    runs = []
    for start, stop in pairwise(cuts.tolist()):
        spread = float(np.sqrt(np.mean(trace.sigma[start : stop + 1] ** 2)))
        runs.append(_Stretch(start, stop, int(kind[start]), int(seen[start]), spread))
    return runs


def settled(mark: NDArray[np.uint8], along: NDArray[np.float64], lasting: tuple[int, ...] = ()) -> NDArray[np.uint8]:
    """Let runs shorter than SHORT_RUN_M take the value of the run before them (the first one, of the one after).

    Parameters
    ----------
    mark : (n,) values along a line; along : (n,) distances, metres.
    lasting : values whose runs stay however short.
    """
    result = mark.copy()
    bounds = [0, *(np.flatnonzero(mark[1:] != mark[:-1]) + 1).tolist(), len(mark)]
    runs = list(pairwise(bounds))
    for number, (start, stop) in enumerate(runs):
        short = along[min(stop, len(mark) - 1)] - along[start] < SHORT_RUN_M
        if short and int(mark[start]) not in lasting and len(runs) > 1:
            result[start:stop] = result[start - 1] if number else mark[stop]
    return result


def _near_seed(trace: Trace, seeds: Sequence[tuple[str, NDArray[np.float64]]]) -> str | None:
    line = shapely.LineString(trace.points)
    near = [seed_id for seed_id, place in seeds if shapely.distance(line, shapely.Point(place)) <= SEED_REACH_M]
    return near[0] if near else None


def _prevailing(trace: Trace) -> int:
    step = np.hypot(*np.diff(trace.points, axis=0).T)
    return int(np.argmax(np.bincount(trace.kind[:-1], weights=step, minlength=len(KINDS))))


def _mm(value: float) -> float:
    return round(float(value), 3)
