"""Sharp corners: found where following fails, and drawn as one vertex where two straight legs meet."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from roadhem.tracing.follow import CORNER, FORM, LEFT, NEAR, RIGHT, SIGMA, TRAVEL, TX, TY, X, Y
from roadhem.tracing.scout import lines_at, outward
from roadhem.tracing.settings import Settings
from roadhem.tracing.sheet import NO_DATA, OUTSIDE, Sheet
from roadhem.tracing.stretch import LANDED, Rows, side, walk_on


@dataclass(frozen=True)
class Leg:
    """A straight through a point, with a unit direction."""

    point: NDArray[np.float64]
    direction: NDArray[np.float64]

    def meets(self, other: Leg) -> NDArray[np.float64] | None:
        """Where two legs cross; None where they are nearly parallel."""
        cross = self.direction[0] * other.direction[1] - self.direction[1] * other.direction[0]
        if abs(cross) < 0.2:
            return None
        between = other.point - self.point
        return self.point + self.direction * (
            (between[0] * other.direction[1] - between[1] * other.direction[0]) / cross
        )


def straight(rows: Rows) -> Leg:
    """Straight of least squared distances through rows, in their direction; from the headings of one or two."""
    xy = rows[:, [X, Y]]
    middle = xy.mean(axis=0)
    if len(rows) < 3:
        heading = rows[:, [TX, TY]].mean(axis=0)
        return Leg(middle, heading / np.hypot(*heading))
    dx, dy = (xy - middle).T
    theta = 0.5 * math.atan2(2.0 * float(dx @ dy), float(dx @ dx - dy @ dy))
    direction = np.array([math.cos(theta), math.sin(theta)])
    return Leg(middle, direction if direction @ (xy[-1] - xy[0]) >= 0 else -direction)


def between(rows: Rows, low_m: float, high_m: float, at_m: float) -> Rows:
    """Rows whose travel lies low_m to high_m from at_m; the nearest one beyond low_m if there are none."""
    away = np.abs(rows[:, TRAVEL] - at_m)
    chosen = rows[(away >= low_m) & (away <= high_m)]
    return chosen if len(chosen) else rows[[int(np.argmin(np.abs(away - low_m)))]]


def turn_of(a: NDArray[np.float64], b: NDArray[np.float64]) -> float:
    """Angle from direction a to direction b, radians, positive to the left."""
    return math.atan2(a[0] * b[1] - a[1] * b[0], float(a @ b))


def vertex_row(corner: NDArray[np.float64], before: Rows, after: Rows) -> Rows:
    """Row of a corner's vertex: the properties of the row before it, the larger spread of both."""
    row = before.copy()
    row[[X, Y]] = corner
    heading = before[[TX, TY]] + after[[TX, TY]]
    row[[TX, TY]] = heading / max(float(np.hypot(*heading)), 1e-9)
    row[SIGMA] = max(before[SIGMA], after[SIGMA])
    row[FORM] = CORNER
    row[TRAVEL] = before[TRAVEL] + float(np.hypot(*(corner - before[[X, Y]])))
    return row


def turn_corner(sheet: Sheet, rows: Rows, settings: Settings) -> Rows | None:
    """Continue round a sharp corner where following stopped.

    Looks for a line that leads away from the end at any turn, proves it by following, and joins both by the vertex
    in which their straights meet.

    Returns
    -------
    The rows up to the corner, its vertex, and the rows proved beyond; None if there is no such line.
    """
    tried: list[NDArray[np.float64]] = []
    for way in _ways_out(sheet, rows, settings):
        if any(abs(turn_of(way.row[[TX, TY]], other)) < settings.corner_apart for other in tried):
            continue
        tried.append(way.row[[TX, TY]])
        start = way.row[None].copy()
        start[0, TRAVEL] = 0.0
        proof, code, _ = walk_on(sheet, start, settings.corner_leg_m, settings)
        proved = proof[-1, TRAVEL] >= settings.corner_proof_m or code in (OUTSIDE, NO_DATA)
        corner = way.leg.meets(straight(proof)) if proved else None
        if corner is not None and np.hypot(*(corner - rows[-1, [X, Y]])) <= settings.corner_reach_m:
            both = _join(rows, proof, corner, way.blur_m)
            if both is not None:
                return both
        if len(tried) >= settings.corner_tries:
            break
    return None


@dataclass(frozen=True)
class _Way:
    """A line leading away from an end: a row on it, the leg before the corner, and how far the fields bend there."""

    row: Rows
    leg: Leg
    blur_m: float
    score: float


def _ways_out(sheet: Sheet, rows: Rows, settings: Settings) -> list[_Way]:
    """Lines leading away from the end of the rows, the best first."""
    end, here = rows[-1], rows[-1, [X, Y]]
    blunt = straight(between(rows, settings.corner_blur_m, settings.corner_leg_m, end[TRAVEL]))
    found = outward(lines_at(sheet, here + _rings(blunt.direction, settings), settings), here)
    away = found[:, [X, Y]] - here
    distance = np.hypot(*away.T)
    fits = (found[:, NEAR] >= settings.pace.present) & (distance >= settings.corner_blur_m)
    fits &= np.sum(away * found[:, [TX, TY]], axis=1) >= 0.8 * distance
    fits &= (found[:, LEFT] - found[:, RIGHT]) * side(rows[-20:]) > 0
    ways = []
    for row in found[fits]:
        turn = abs(turn_of(blunt.direction, row[[TX, TY]]))
        if not settings.corner_least <= turn <= settings.corner_most:
            continue
        blur = max(settings.corner_blur_m, 0.5 * settings.corner_open_m / math.sin(0.5 * (math.pi - turn)))
        leg = blunt
        if blur > settings.corner_blur_m:
            leg = straight(between(rows, blur, blur + settings.corner_leg_m, end[TRAVEL]))
        corner = leg.meets(Leg(row[[X, Y]], row[[TX, TY]]))
        if corner is not None and (off := float(np.hypot(*(corner - here)))) <= settings.corner_reach_m:
            ways.append(_Way(row, leg, blur, row[NEAR] - 0.3 * off))
    return sorted(ways, key=lambda way: (-round(way.score, 6), *way.row[[X, Y]]))


def _rings(direction: NDArray[np.float64], settings: Settings) -> NDArray[np.float64]:
    """Places (n, 2) on the rings around an end, up to the largest turn either way."""
    ahead = math.atan2(direction[1], direction[0])
    places = []
    for radius in settings.corner_rings_m:
        angles = ahead + np.arange(-settings.corner_most, settings.corner_most, settings.scout_m / radius)
        places.append(radius * np.stack([np.cos(angles), np.sin(angles)], axis=-1))
    return np.concatenate(places)


def _join(before: Rows, after: Rows, corner: NDArray[np.float64], blur_m: float) -> Rows | None:
    """Both legs without the rows near the corner, where the fields bend, and the vertex between them."""
    last = len(before) - 1
    while last > 0 and np.hypot(*(before[last, [X, Y]] - corner)) < blur_m:
        last -= 1
    begun = np.hypot(after[:, X] - corner[0], after[:, Y] - corner[1]) >= blur_m
    if (corner - before[last, [X, Y]]) @ before[last, [TX, TY]] <= 0 or not begun.any():
        return None
    rest = after[int(np.argmax(begun)) :][:LANDED].copy()
    vertex = vertex_row(corner, before[last], rest[0])
    rest[:, TRAVEL] += vertex[TRAVEL] + np.hypot(*(rest[0, [X, Y]] - corner)) - rest[0, TRAVEL]
    return np.concatenate([before[: last + 1], vertex[None], rest])
