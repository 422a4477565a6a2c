"""Exact distances from grid cells to the nearest of many lines, within a reach."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numba
import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry import LineString

from roadhem_training.scenes.coverage import Frame, inside
from roadhem_training.scenes.world import World

RENDER_REACH_M = 2.5
"""Distance up to which the picture needs to know its nearest edge."""


@dataclass(frozen=True)
class NearestField:
    """For every cell centre the nearest point on any line; row 0 is north.

    Attributes
    ----------
    distance : (n, n) float32 metres, cut at the reach.
    dx, dy : (n, n) float32 metres east and north from the cell centre to the nearest point; 0 beyond the reach.
    theta : (n, n) float32 axis angle of the line there, radians in [0, pi), from east counter-clockwise.
    along : (n, n) float32 metres from the start of the line to the nearest point; 0 beyond the reach.
    line_index : (n, n) int32 index of the line, -1 beyond the reach; where several are equally near, the first.
    """

    distance: NDArray[np.float32]
    dx: NDArray[np.float32]
    dy: NDArray[np.float32]
    theta: NDArray[np.float32]
    along: NDArray[np.float32]
    line_index: NDArray[np.int32]


@dataclass(frozen=True)
class SignedDistance:
    """Signed distance to the edge of the drive-over surface.

    Attributes
    ----------
    sdf : (n, n) float32 metres, negative inside the surface, cut at +- RENDER_REACH_M.
    nearest : vectors to, and index of, the nearest TrueEdge.
    """

    sdf: NDArray[np.float32]
    nearest: NearestField


def nearest_on_lines(lines: Sequence[LineString], size_m: float, cell: float, reach: float) -> NearestField:
    """Find the nearest point on `lines` for every cell of a grid over [0, size_m] squared.

    Parameters
    ----------
    lines : local metres, x east, y north.
    size_m : side of the square, metres.
    cell : side of a cell, metres; distances are from cell centres.
    reach : metres beyond which nothing is looked for.

    Returns
    -------
    NearestField of round(size_m / cell) squared cells. Exact: every cell within reach of a piece is compared with it.
    """
    count = round(size_m / cell)
    keep = [k for k, line in enumerate(lines) if not line.is_empty]
    coords, owner = shapely.get_coordinates([lines[k] for k in keep], return_index=True)
    index = np.asarray(keep, np.int32)[owner] if keep else np.zeros(0, np.int32)
    joined = owner[1:] == owner[:-1]
    pieces, parts, begin = _split_long(coords[:-1][joined], coords[1:][joined], owner[:-1][joined], reach)
    lines_of = index[:-1][joined][parts]
    return NearestField(*_search(pieces, begin, lines_of, count, float(cell), float(reach), float(size_m)))


def signed_distance(world: World, pixel: float) -> SignedDistance:
    """Signed distance of every pixel centre of the frame to the world's edges; the sign from `world.surface`."""
    nearest = nearest_on_lines([edge.line for edge in world.edges], world.size, pixel, RENDER_REACH_M)
    road = inside(world.surface, Frame.of_size(world.size, pixel))
    return SignedDistance(np.where(road, -nearest.distance, nearest.distance), nearest)


def _split_long(
    starts: NDArray[np.float64], ends: NDArray[np.float64], line: NDArray[np.int64], longest: float
) -> tuple[NDArray[np.float64], NDArray[np.int64], NDArray[np.float64]]:
    """Cut segments so that none is longer than `longest`.

    Returns
    -------
    pieces (m, 4), the segment each comes from (m,), and how far along its line it begins (m,).
    """
    lengths = np.hypot(*(ends - starts).T)
    parts = np.maximum(np.ceil(lengths / longest), 1).astype(np.int64)
    owner = np.repeat(np.arange(len(starts)), parts)
    order = np.arange(len(owner)) - np.repeat(np.cumsum(parts) - parts, parts)
    share, step = (order / parts[owner])[:, None], (1 / parts[owner])[:, None]
    before = np.cumsum(lengths) - lengths
    first = np.searchsorted(line, line)
    begin = (before - before[first])[owner] + share[:, 0] * lengths[owner]
    run = (ends - starts)[owner]
    return np.hstack([starts[owner] + run * share, starts[owner] + run * (share + step)]), owner, begin


@numba.njit(cache=True)
def _search(pieces, begin, index, count, cell, reach, size):  # type: ignore[no-untyped-def]
    shape = (count, count)
    best = np.full(shape, reach * reach, np.float64)
    dx, dy = np.zeros(shape, np.float32), np.zeros(shape, np.float32)
    theta, along = np.zeros(shape, np.float32), np.zeros(shape, np.float32)
    line = np.full(shape, -1, np.int32)
    for k in range(len(pieces)):
        x0, y0, x1, y1 = pieces[k, 0], pieces[k, 1], pieces[k, 2], pieces[k, 3]
        ux, uy = x1 - x0, y1 - y0
        square = ux * ux + uy * uy
        if square == 0.0:
            continue
        angle, length = np.arctan2(uy, ux) % np.pi, np.sqrt(square)
        c0, c1 = int((min(x0, x1) - reach) / cell), int((max(x0, x1) + reach) / cell) + 1
        r0, r1 = int((size - max(y0, y1) - reach) / cell), int((size - min(y0, y1) + reach) / cell) + 1
        for r in range(max(r0, 0), min(r1, count)):
            y = size - (r + 0.5) * cell
            for c in range(max(c0, 0), min(c1, count)):
                x = (c + 0.5) * cell
                share = min(max(((x - x0) * ux + (y - y0) * uy) / square, 0.0), 1.0)
                ex, ey = x0 + share * ux - x, y0 + share * uy - y
                gap = ex * ex + ey * ey
                if gap < best[r, c]:
                    best[r, c] = gap
                    dx[r, c], dy[r, c], theta[r, c], line[r, c] = ex, ey, angle, index[k]
                    along[r, c] = begin[k] + share * length
    return np.sqrt(best).astype(np.float32), dx, dy, theta, along, line
