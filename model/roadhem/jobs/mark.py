"""Proposing seeds: one on every edge that the fields show beyond doubt."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray

from roadhem.errors import BadInput
from roadhem.fields.layout import CELL_M, COVER, COVER_VALID, NET_FIELDS, QUANTUM
from roadhem.jobs.session import PAGE, PAGE_M, Inputs, Opener, Session, along_curve, page_of
from roadhem.jobs.trace import Progress
from roadhem.lines.files import check_target
from roadhem.lines.geopackage import SUFFIX, write_geopackage
from roadhem.lines.records import SEED_REACH_M
from roadhem.lines.simplify import rounded
from roadhem.lines.tables import Table
from roadhem.tracing.result import Trace

LEAST_NEARNESS = 0.6
MOST_SIGMA_M = 0.15
ON_EDGE_M = 0.12
"""Farthest that the edge may be from the middle of a candidate cell."""
SIDE_M = 0.8
"""How far to either side the surface is looked at."""
LEAST_STEP = 0.5
"""Least difference of the surface's probability between the two sides."""
APART_M = 0.8
"""Candidates this close to a line that is already found are on it."""
LEAST_LENGTH_M = 4.0
"""Shorter lines are not worth a seed."""

COLUMNS = {"seed_id": "text", "length_m": "real", "spread_m": "real"}


@dataclass(frozen=True)
class MarkJob:
    """What to look at, and the GeoPackage to write."""

    inputs: Inputs
    out: Path


@dataclass(frozen=True)
class MarkSummary:
    """What came of it."""

    seeds: int
    km: float
    faults: list[str]
    warnings: list[str]


@dataclass
class _Found:
    """Lines found so far, by the pages they touch."""

    on_page: dict[tuple[int, int], list[Any]] = field(default_factory=dict)

    def add(self, trace: Trace) -> None:
        line = shapely.LineString(trace.points)
        reach = np.concatenate([trace.points - APART_M, trace.points + APART_M])
        for page in {page_of(x, y) for x, y in reach}:
            self.on_page.setdefault(page, []).append(line)

    def free(self, page: tuple[int, int], places: NDArray[np.float64]) -> NDArray[np.bool_]:
        lines = self.on_page.get(page, [])
        taken = np.zeros(len(places), dtype=bool)
        if lines and len(places):
            near = shapely.STRtree(lines).query(shapely.points(places), predicate="dwithin", distance=APART_M)
            taken[near[0]] = True
        return ~taken


def mark_tiles(job: MarkJob, opener: Opener, progress: Progress) -> MarkSummary:
    """Look over all tiles and write a seed for every sure edge.

    Raises
    ------
    BadInput, RoadhemError : see the sentence; the old output, if any, is still there.
    """
    check_target(job.out, (SUFFIX,))
    session = opener(job.inputs)
    table = Table("seeds", "Point", COLUMNS)
    for place, trace in proposals(session, progress):
        xy = rounded(session.grid.to_crs(place), session.grid.scale)
        length = float(np.hypot(*np.diff(trace.points, axis=0).T).sum())
        spread = float(np.median(trace.sigma))
        table.add(
            shapely.Point(xy), seed_id=str(len(table.rows) + 1), length_m=round(length, 3), spread_m=round(spread, 3)
        )
    write_geopackage(job.out, [table], session.crs)
    km = round(sum(row["length_m"] for row in table.rows) / 1000, 3)
    return MarkSummary(len(table.rows), km, list(session.faults), list(session.warnings))


def proposals(session: Session, progress: Progress) -> Iterator[tuple[NDArray[np.float64], Trace]]:
    """Yield places (grid metres) with the line each one gives, page by page, surest first within each."""
    found = _Found()
    pages = _pages(session)
    for number, page in enumerate(pages):
        progress(number, len(pages))
        places = candidates(session.fields(*page), page)
        while len(places := places[found.free(page, places)]):
            place, places = places[0], places[1:]
            trace = session.trace(place[None])
            if not isinstance(trace, Trace) or not _sure(trace, place):
                places = places[np.hypot(*(places - place).T) > APART_M]
                continue
            found.add(trace)
            yield place, trace
    progress(len(pages), len(pages))


def candidates(fields: NDArray[np.int16], page: tuple[int, int]) -> NDArray[np.float64]:
    """Return the places on a page where an edge is sure, surest first, (n, 2) grid metres.

    Sure: the edge runs through the cell, is near 1, has a small spread and drive-over surface on one side only.
    """
    value = {name: _values(fields, name) for name in ("nearness", "other", "dx", "dy", "log_sigma", "cos2", "sin2")}
    sigma = np.exp(value["log_sigma"])
    good = (
        (fields[..., COVER] == COVER_VALID)
        & (value["nearness"] >= LEAST_NEARNESS)
        & (value["nearness"] >= value["other"])
        & (np.hypot(value["dx"], value["dy"]) <= ON_EDGE_M)
        & (sigma <= MOST_SIGMA_M)
    )
    i, j = np.nonzero(good)
    theta = np.arctan2(value["sin2"][i, j], value["cos2"][i, j]) / 2
    kept = _surface_step(_values(fields, "surface"), i, j, theta) >= LEAST_STEP
    i, j = i[kept], j[kept]
    order = np.lexsort((j, i, sigma[i, j], -value["nearness"][i, j]))
    i, j = i[order], j[order]
    x = (page[1] * PAGE + j + 0.5) * CELL_M + value["dx"][i, j]
    y = -(page[0] * PAGE + i + 0.5) * CELL_M + value["dy"][i, j]
    return np.stack([x, y], axis=1)


def _surface_step(
    surface: NDArray[np.float64], i: NDArray[np.int64], j: NDArray[np.int64], theta: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Difference of the surface's probability SIDE_M to the left and right; within the page."""
    reach = SIDE_M / CELL_M
    di, dj = np.rint(-reach * np.cos(theta)).astype(int), np.rint(-reach * np.sin(theta)).astype(int)
    last = PAGE - 1
    left = surface[np.clip(i + di, 0, last), np.clip(j + dj, 0, last)]
    right = surface[np.clip(i - di, 0, last), np.clip(j - dj, 0, last)]
    step: NDArray[np.float64] = np.abs(left - right)
    return step


def _sure(trace: Trace, place: NDArray[np.float64]) -> bool:
    long = np.hypot(*np.diff(trace.points, axis=0).T).sum() >= LEAST_LENGTH_M
    beside = shapely.distance(shapely.LineString(trace.points), shapely.Point(place)) <= SEED_REACH_M
    return bool(long and beside and np.median(trace.sigma) <= MOST_SIGMA_M)


def _pages(session: Session) -> list[tuple[int, int]]:
    minx, miny, maxx, maxy = session.bounds_m
    if not np.isfinite([minx, miny, maxx, maxy]).all():
        raise BadInput("The tiles have no extent; check their transforms")
    (top, left), (bottom, right) = page_of(minx, maxy), page_of(maxx, miny)
    pages = [(p, q) for p in range(top, bottom + 1) for q in range(left, right + 1)]
    covered = [(p, q) for p, q in pages if session.covers((q + 0.5) * PAGE_M, -(p + 0.5) * PAGE_M, PAGE_M / 2)]
    return sorted(covered, key=along_curve)


def _values(fields: NDArray[np.int16], name: str) -> NDArray[np.float64]:
    return np.asarray(fields[..., NET_FIELDS.index(name)] * QUANTUM.get(name, 1e-4), dtype=np.float64)
