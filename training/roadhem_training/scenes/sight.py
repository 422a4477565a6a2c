"""How each stretch of a scene's edges is seen, and where a person would click beside them."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
import shapely
import shapely.ops
from numpy.typing import NDArray
from shapely.geometry import LineString, Point

from roadhem_training.scenes.scene import Scene
from roadhem_training.scenes.world import TrueEdge

STEP_M = 0.1
"""Spacing at which the masks are looked up along an edge."""

SEEN, SHADOW, HIDDEN = 0, 1, 2
SEEN_NAMES = ("seen", "shadow", "hidden")

SAME_M = 1e-6
"""Coordinates are rounded to this before lines are joined."""

SHORTEST_M = 0.5
"""Shorter runs take the state of what lies before them."""

DOUBTFUL_M = 1.5
"""An uncovered run shorter than this between hidden ones cannot be judged for sure."""

SEED_STRETCH_M = 5.0
SEED_OFFSET_M = (0.2, 0.8)
"""A visible stretch at least this long gets a seed, this far beside it."""

FEWEST_SEEDS = 8


@dataclass(frozen=True)
class Piece:
    """A stretch of edge with one kind, seen in one way; visible : "yes", "hidden" or "unsure"."""

    line: LineString
    kind: str
    visible: str
    seen: str


def edge_pieces(scene: Scene) -> list[Piece]:
    """Split the edges within the frame where their kind or their sight changes; join what continues alike."""
    frame = shapely.box(0, 0, scene.world.size, scene.world.size)
    groups: dict[tuple[str, str, str], list[LineString]] = {}
    for edge in scene.world.edges:
        for part in _lines(shapely.intersection(edge.line, frame)):
            for line, visible, seen in _split(part, edge, scene):
                groups.setdefault((edge.kind, visible, seen), []).append(line)
    pieces = [Piece(line, *key) for key, lines in groups.items() for line in _joined(lines)]
    return sorted(pieces, key=lambda piece: (*piece.line.coords[0], *piece.line.coords[-1]))


def place_seeds(scene: Scene, pieces: list[Piece], seed: int) -> list[Point]:
    """Put one point beside each visible stretch, more on the longest ones until there are FEWEST_SEEDS.

    A point lies SEED_OFFSET_M beside its stretch, nearer to it than to any other, at a place in the sun if there is
    one.
    """
    rng = np.random.default_rng([seed, 9])
    visible = _joined([piece.line for piece in pieces if piece.visible == "yes"])
    lines = sorted((x for x in visible if x.length >= SEED_STRETCH_M), key=lambda x: (*x.coords[0], *x.coords[-1]))
    shares = _spread_seeds([line.length for line in lines])
    others = shapely.STRtree([piece.line for piece in pieces])
    found = []
    for line, count in zip(lines, shares, strict=True):
        for k in range(count):
            span = line.length * k / count, line.length * (k + 1) / count
            found += _seed_beside(line, span, scene, others, rng)
    return found


def _spread_seeds(lengths: list[float]) -> list[int]:
    """Return the number of seeds for each stretch: one, and more where they are longest until there are enough."""
    counts = [1] * len(lengths)
    while lengths and sum(counts) < FEWEST_SEEDS:
        counts[int(np.argmax(np.asarray(lengths) / counts))] += 1
    return counts


def _seed_beside(
    line: LineString, span: tuple[float, float], scene: Scene, others: shapely.STRtree, rng: np.random.Generator
) -> list[Point]:
    inner = min(1.5, 0.3 * (span[1] - span[0]))
    best: Point | None = None
    for _ in range(24):
        at = rng.uniform(span[0] + inner, span[1] - inner)
        offset = rng.uniform(*SEED_OFFSET_M) * rng.choice([-1, 1])
        foot, ahead = line.interpolate(at), line.interpolate(min(at + 0.05, line.length))
        along = np.array([ahead.x - foot.x, ahead.y - foot.y])
        along /= max(float(np.hypot(*along)), 1e-9)
        point = Point(foot.x - offset * along[1], foot.y + offset * along[0])
        nearest = float(np.min(shapely.distance(point, others.geometries[others.query_nearest(point)])))
        in_frame = 0 < point.x < scene.world.size and 0 < point.y < scene.world.size
        if not in_frame or nearest < abs(offset) - 0.02 or line.distance(point) > nearest + 1e-6:
            continue
        if _states(np.array([[foot.x, foot.y]]), scene)[0] == SEEN:
            return [point]
        best = best or point
    return [best] if best is not None else []


def _split(line: LineString, edge: TrueEdge, scene: Scene) -> list[tuple[LineString, str, str]]:
    count = max(int(np.ceil(line.length / STEP_M)), 1)
    middles = (np.arange(count) + 0.5) * line.length / count
    states = _states(shapely.get_coordinates(shapely.line_interpolate_point(line, middles)), scene)
    runs = _runs(states, SHORTEST_M * count / line.length)
    out = []
    for first, last, state in runs:
        end = line.length if last == count else last * line.length / count
        part = shapely.ops.substring(line, first * line.length / count, end)
        out.append((part, _visible(runs, first, state, part.length), SEEN_NAMES[state]))
    return out


def _visible(runs: list[tuple[int, int, int]], first: int, state: int, length: float) -> str:
    if state == HIDDEN:
        return "hidden"
    k = next(i for i, run in enumerate(runs) if run[0] == first)
    between = 0 < k < len(runs) - 1 and runs[k - 1][2] == HIDDEN and runs[k + 1][2] == HIDDEN
    return "unsure" if between and length < DOUBTFUL_M else "yes"


def _states(xy: NDArray[np.float64], scene: Scene) -> NDArray[np.int64]:
    rows, cols = scene.hidden.shape
    col = np.clip((xy[:, 0] / scene.pixel).astype(int), 0, cols - 1)
    row = np.clip(((scene.world.size - xy[:, 1]) / scene.pixel).astype(int), 0, rows - 1)
    hidden = scene.hidden[row, col] | ~scene.valid[row, col]
    return np.where(hidden, HIDDEN, np.where(scene.shadow[row, col], SHADOW, SEEN))


def _runs(states: NDArray[np.int64], shortest: float) -> list[tuple[int, int, int]]:
    """Runs of equal state as (first, end, state); those shorter than `shortest` join the one before."""
    starts = [0, *(np.flatnonzero(np.diff(states)) + 1).tolist(), len(states)]
    runs: list[tuple[int, int, int]] = []
    for first, last in pairwise(starts):
        state = int(states[first])
        if runs and (last - first < shortest or runs[-1][2] == state):
            runs[-1] = (runs[-1][0], last, runs[-1][2])
        else:
            runs.append((first, last, state))
    return runs


def _joined(lines: list[LineString]) -> list[LineString]:
    """Join lines that meet end to start, to within SAME_M."""
    if not lines:
        return []
    rounded = shapely.set_precision(shapely.MultiLineString(lines), SAME_M, mode="pointwise")
    return _lines(shapely.line_merge(rounded, directed=True))


def _lines(shape: shapely.Geometry) -> list[LineString]:
    return [part for part in shapely.get_parts(shape) if part.geom_type == "LineString" and part.length > 0]
