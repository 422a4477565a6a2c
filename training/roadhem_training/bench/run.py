"""A set traced as a user would trace it: through `trace_tiles`, to lines with spread and doubts in grid metres."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray

from roadhem.jobs.session import Session, open_session
from roadhem.jobs.trace import TraceJob, trace_tiles
from roadhem.lines.records import TracedLayers
from roadhem.lines.seeds import read_seeds
from roadhem.tiles.grid import WorkingGrid
from roadhem.tracing.result import Unplaced
from roadhem_training.bench.samples import Floats
from roadhem_training.bench.sets import SEEDS, BenchSet

TraceFrom = Callable[[Floats], Any]
"""From points (n, 2) in grid metres to a LineString, or None where nothing was placed."""


@dataclass(frozen=True)
class Traced:
    """What a set's seeds gave.

    Attributes
    ----------
    lines : (n,) LineStrings, grid metres. spread_from : for each line, (k,) metres from its start at which a stretch
    begins; spread : (k,) of these stretches, metres.
    doubts : (m, 2) grid metres; weights : (m,). seeds : (s, 2) grid metres. unplaced : how many of them.
    session : to trace more with.
    """

    lines: NDArray[Any]
    spread_from: list[Floats]
    spread: list[Floats]
    doubts: Floats
    weights: Floats
    seeds: Floats
    unplaced: int
    session: Session

    def trace(self, points: Floats) -> Any:
        """Trace from one more seed, (n, 2) with its via points: a LineString or None."""
        outcome = self.session.trace(points)
        return None if isinstance(outcome, Unplaced) else shapely.LineString(outcome.points)


def trace_set(bench_set: BenchSet, model: Path, out: Path) -> Traced:
    """Trace a set's seeds; the GeoPackage stays in `out`."""
    source = str(bench_set.folder / SEEDS)
    job = TraceJob(bench_set.inputs(model), source, out / f"{bench_set.name}.gpkg")
    summary = trace_tiles(job, open_session, lambda done, total: None)
    session, layers = summary.session, summary.layers
    lines = _in_metres(layers.edges.geometry, session.grid)
    starts, spreads = _spreads(layers, shapely.length(lines))
    doubts = _in_metres(layers.doubts.geometry, session.grid)
    return Traced(
        lines,
        starts,
        spreads,
        shapely.get_coordinates(doubts),
        np.array([row["weight"] for row in layers.doubts.rows], dtype=float),
        session.grid.to_metres([seed.points[0] for seed in read_seeds(source, session.crs)]).reshape(-1, 2),
        summary.unplaced,
        session,
    )


def _in_metres(shapes: list[Any], grid: WorkingGrid) -> NDArray[Any]:
    held = np.empty(len(shapes), dtype=object)
    held[:] = shapes
    return np.asarray(shapely.transform(held, grid.to_metres), dtype=object)


def _spreads(layers: TracedLayers, length: Floats) -> tuple[list[Floats], list[Floats]]:
    """Return where each line's stretches begin, in grid metres along it, and their spread."""
    by_edge: dict[str, list[tuple[float, float]]] = {row["edge_id"]: [] for row in layers.edges.rows}
    for row in layers.stretches.rows:
        by_edge[row["edge_id"]].append((row["from_m"], row["spread_m"]))
    starts, spreads = [], []
    for row, whole in zip(layers.edges.rows, length, strict=True):
        begin, spread = np.array(sorted(by_edge[row["edge_id"]])).T
        starts.append(begin * whole / row["length_m"])
        spreads.append(spread)
    return starts, spreads
