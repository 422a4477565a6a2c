"""How many clicks beyond the first an edge takes, by a person who always clicks the middle of the largest gap."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import shapely

from roadhem_training.bench.compare import RIGHT_M, share
from roadhem_training.bench.run import TraceFrom
from roadhem_training.bench.samples import Floats, along_lines, nearest
from roadhem_training.bench.truth import Lines

ENOUGH = 0.95
"""An edge is done when this share of it is right."""
MOST = 10
HAND_STEP_M = 2.0
"""A person gives an edge up after MOST clicks beyond the first, or one each HAND_STEP_M: that is drawing by hand."""
SHORTEST_EDGE_M = 5.0
SEED_REACH_M = 1.0


@dataclass(frozen=True)
class Clicked:
    """One edge: its length, the clicks it took beyond the first, and whether it was then right."""

    length: float
    clicks: int
    done: bool


def click_edges(edges: Lines, seeds: Floats, trace: TraceFrom) -> list[Clicked]:
    """Click every edge of some length from its own seed, or from its middle where none lies beside it."""
    long = [edge for edge in edges if edge.length >= SHORTEST_EDGE_M]
    return [click_edge(edge, _first(edge, seeds), trace) for edge in long]


def click_edge(edge: Any, first: Floats, trace: TraceFrom) -> Clicked:
    """Click until ENOUGH of an edge lies within RIGHT_M of the lines, or as often as a person would.

    Each click lies on the edge, in the middle of the largest gap; gaps end at earlier clicks, so that a click that
    gave nothing is not made again. It is tried as a seed of its own and as one more point of a trace through all
    clicks; what is right of either is kept.
    """
    samples = along_lines(np.array([edge], dtype=object))
    own = float(edge.project(shapely.Point(first)))
    lines = [trace(first[None])]
    clicks: list[float] = []
    most = min(MOST, int(edge.length / HAND_STEP_M))
    while (right := _right(samples, lines)).mean() < ENOUGH and len(clicks) < most:
        at = largest_gap(right, samples.along, clicks)
        clicks.append(at)
        lines.append(trace(_on(edge, [at])))
        through = sorted([own, *clicks])
        lines.append(trace(np.where(np.equal(through, own)[:, None], first, _on(edge, through))))
    return Clicked(edge.length, len(clicks), bool(right.mean() >= ENOUGH))


def _on(edge: Any, along: Sequence[float]) -> Floats:
    return shapely.get_coordinates(shapely.line_interpolate_point(edge, along))


def largest_gap(right: np.ndarray, along: Floats, clicks: Sequence[float]) -> float:
    """Middle of the longest run that is not right, runs ending at clicks too; metres along."""
    between = np.searchsorted(np.sort(clicks), along)
    fresh = np.append(True, (right[1:] != right[:-1]) | (between[1:] != between[:-1]))
    run = np.cumsum(fresh) - 1
    longest = np.flatnonzero(run == np.argmax(np.bincount(run, weights=~right)))
    return float((along[longest[0]] + along[longest[-1]]) / 2)


def click_figures(clicked: Sequence[Clicked]) -> dict[str, float]:
    """Pool edges by length."""
    length = sum(one.length for one in clicked)
    return {
        "edges": len(clicked),
        "corrections per 100 m": share(sum(one.clicks for one in clicked), length / 100),
        "seeds and corrections per 100 m": share(sum(one.clicks + 1 for one in clicked), length / 100),
        "edges given up": share(sum(not one.done for one in clicked), len(clicked)),
        "edges right from the first seed": share(sum(one.done and not one.clicks for one in clicked), len(clicked)),
    }


def _right(samples: Any, lines: Sequence[Any]) -> np.ndarray:
    found = np.array([line for line in lines if line is not None], dtype=object)
    return nearest(samples, found).distance <= RIGHT_M


def _first(edge: Any, seeds: Floats) -> Floats:
    distance = shapely.distance(edge, shapely.points(seeds)) if len(seeds) else np.empty(0)
    if len(distance) and distance.min() <= SEED_REACH_M:
        return seeds[np.argmin(distance)]
    return shapely.get_coordinates(edge.interpolate(0.5, normalized=True))[0]
