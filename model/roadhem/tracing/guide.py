"""Lines guided through points that a person gave."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from roadhem.fields.layout import CELL_M, COVER, COVER_VALID
from roadhem.tracing.follow import BRIDGE, COAST, FORM, HAND, NEAR, SIGMA, TRAVEL, TX, TY, X, Y
from roadhem.tracing.scout import lines_at
from roadhem.tracing.settings import Settings
from roadhem.tracing.sheet import NEARNESS, Sheet
from roadhem.tracing.stretch import Rows, turned, walk_on
from roadhem.tracing.walk import Line, further

Places = NDArray[np.float64]


def guided(sheet: Sheet, line: Line, seed: Places, via: Places, limit_m: float, settings: Settings) -> Line:
    """Return a line from a seed through further points, in order.

    Parameters
    ----------
    line : what the seed alone gives. If it passes all points in order, it is bent to them; else it is followed from
        the seed to each point in turn, by a least-cost path where following does not lead there, and beyond the last
        point and before the seed as far as it goes.
    seed : (2,). via : (n, 2).
    """
    rows = line.rows
    at = [_foot(rows, place)[0] for place in (seed, *via)]
    if not line.closed and all(np.diff(at) < 0):
        line, at = Line(turned(rows), line.end_reason, line.start_reason, False), at[::-1]
        rows, at = line.rows, [_foot(line.rows, place)[0] for place in (seed, *via)]
    near = all(_foot(rows, place)[1] <= settings.guide_near_m for place in via)
    if near and (line.closed or all(np.diff(at) > 0)):
        return Line(_bent(rows, via, settings), line.start_reason, line.end_reason, line.closed)
    start = int(_foot(rows, seed)[0])
    rows = rows[start : start + 1].copy()
    rows[:, [TRAVEL, COAST]] = 0.0
    for place in via:
        rows = _to(sheet, rows, place, settings)
    budget = rows[-1, TRAVEL] + 0.5 * limit_m
    ahead, end_reason = further(sheet, walk_on(sheet, rows, budget, settings), budget, settings)
    back = walk_on(sheet, turned(ahead.rows), 0.5 * limit_m, settings)
    back, start_reason = further(sheet, back, 0.5 * limit_m, settings)
    return Line(_bent(turned(back.rows), via, settings), start_reason, end_reason, False)


def _foot(rows: Rows, place: Places) -> tuple[float, float]:
    """Index (with fraction) of the point on the rows nearest to a place, and the distance."""
    a, b = rows[:-1, [X, Y]], rows[1:, [X, Y]]
    if len(a) == 0:
        return 0.0, float(np.hypot(*(rows[0, [X, Y]] - place)))
    along = b - a
    share = np.clip(np.sum((place - a) * along, axis=1) / np.maximum(np.sum(along**2, axis=1), 1e-12), 0.0, 1.0)
    away = np.hypot(*(a + share[:, None] * along - place).T)
    k = int(np.argmin(away))
    return k + float(share[k]), float(away[k])


def _to(sheet: Sheet, rows: Rows, place: Places, settings: Settings) -> Rows:
    """Carry rows on to a place: by following as far as that leads towards it, then along the least-cost path."""
    reach = float(np.hypot(*(place - rows[-1, [X, Y]])))
    budget = 1.6 * reach + settings.guide_margin_m
    best, nearest = rows, reach
    for start in [rows] if len(rows) > 1 else [rows, turned(rows)]:
        walked, _ = further(sheet, walk_on(sheet, start, start[-1, TRAVEL] + budget, settings), budget, settings)
        fresh = walked.rows[min(len(start), len(walked.rows)) - 1 :]
        at, away = _foot(fresh, place)
        if away < nearest:
            best, nearest = np.concatenate([start, fresh[1 : math.ceil(at) + 1]]), away
    if nearest <= settings.guide_near_m:
        return best
    path = _route(sheet, best[-1], place, settings)
    if len(best) == 1 and (path[0, [X, Y]] - best[0, [X, Y]]) @ best[0, [TX, TY]] < 0:
        best = turned(best)
    return np.concatenate([best, path])


def _route(sheet: Sheet, start: Rows, place: Places, settings: Settings) -> Rows:
    """Rows of the least-cost path from a row to a place, laid onto the line where one supports it."""
    from skimage.graph import route_through_array

    ends = np.stack([start[[X, Y]], place])
    low, high = ends.min(axis=0) - settings.guide_margin_m, ends.max(axis=0) + settings.guide_margin_m
    i0, j0 = math.floor(-high[1] / CELL_M), math.floor(low[0] / CELL_M)
    cells = sheet.cells(i0, math.floor(-low[1] / CELL_M) + 1, j0, math.floor(high[0] / CELL_M) + 1)
    nearness = np.where(cells[..., COVER] == COVER_VALID, cells[..., NEARNESS] * 1e-4, 0.0)
    cost = settings.guide_floor + (1.0 - np.clip(nearness, 0.0, 1.0)) ** 2
    first, last = ((math.floor(-y / CELL_M) - i0, math.floor(x / CELL_M) - j0) for x, y in ends)
    path, _ = route_through_array(cost, first, last, geometric=True)
    i, j = np.asarray(path, np.float64).T
    xy = np.stack([(j + j0 + 0.5) * CELL_M, -(i + i0 + 0.5) * CELL_M], axis=-1)
    xy[0], xy[-1] = ends
    return _laid(sheet, start, _spaced(xy, settings.pace.step_max), settings)


def _spaced(xy: Places, step_m: float) -> Places:
    """Points along a stair of cells, softened over its neighbours, about step_m apart."""
    soft = xy.copy()
    for _ in range(3):
        soft[1:-1] = 0.25 * soft[:-2] + 0.5 * soft[1:-1] + 0.25 * soft[2:]
    s = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(soft, axis=0).T))])
    at = np.linspace(0.0, s[-1], max(2, math.ceil(s[-1] / step_m) + 1))
    return np.stack([np.interp(at, s, soft[:, c]) for c in (0, 1)], axis=-1)


def _laid(sheet: Sheet, start: Rows, xy: Places, settings: Settings) -> Rows:
    """Rows of a path: moved sideways onto the line where it is seen within a step, else marked as bridged."""
    heading = np.gradient(xy, axis=0)
    heading /= np.maximum(np.hypot(*heading.T), 1e-9)[:, None]
    rows = lines_at(sheet, xy, settings, heading)
    moved = np.hypot(rows[:, X] - xy[:, 0], rows[:, Y] - xy[:, 1])
    straight_on = np.sum(rows[:, [TX, TY]] * heading, axis=1) >= settings.pace.turn_max
    seen = (rows[:, NEAR] >= settings.pace.present) & (moved <= settings.pace.step_max) & straight_on
    loose = np.tile(start, (len(xy), 1))
    loose[:, [X, Y]], loose[:, [TX, TY]] = xy, heading
    loose[:, SIGMA], loose[:, FORM] = settings.guide_spread_m, BRIDGE
    rows = np.where(seen[:, None], rows, loose)
    steps = np.hypot(*np.diff(rows[:, [X, Y]], axis=0).T)
    rows[:, TRAVEL] = start[TRAVEL] + np.concatenate([[0.0], np.cumsum(steps)])
    return rows[1:]


def _bent(rows: Rows, via: Places, settings: Settings) -> Rows:
    """Rows with a point given by hand at each place, the line near it bent so that it passes there."""
    for place in via:
        at, _ = _foot(rows, place)
        k = min(int(at), len(rows) - 2)
        here = rows[k] + (at - k) * (rows[k + 1] - rows[k])
        shift = place - here[[X, Y]]
        away = np.abs(rows[:, TRAVEL] - here[TRAVEL]) / settings.guide_bend_m
        free = rows[:, FORM] != HAND
        pull = np.where(free, np.cos(0.5 * math.pi * np.minimum(away, 1.0)) ** 2, 0.0)
        rows = rows.copy()
        rows[:, [X, Y]] += pull[:, None] * shift
        point = rows[[k]].copy()
        point[0, [X, Y]], point[0, TRAVEL], point[0, FORM] = place, here[TRAVEL], HAND
        rows = np.concatenate([rows[: k + 1], point, rows[k + 1 :]])
    return rows
