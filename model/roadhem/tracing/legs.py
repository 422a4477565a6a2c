"""Straights fitted to runs of rows, and the corners and curves between them."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from roadhem.tracing.follow import CORNER, FORM, SIGMA, TRAVEL, TX, TY, X, Y
from roadhem.tracing.stretch import Rows

Vector = NDArray[np.float64]


@dataclass(frozen=True)
class Leg:
    """A straight through a point, with a unit direction."""

    point: Vector
    direction: Vector

    def meets(self, other: Leg) -> Vector | None:
        """Where two legs cross; None where they are nearly parallel."""
        cross = self.direction[0] * other.direction[1] - self.direction[1] * other.direction[0]
        if abs(cross) < 0.2:
            return None
        gap = other.point - self.point
        along = (gap[0] * other.direction[1] - gap[1] * other.direction[0]) / cross
        return np.asarray(self.point + along * self.direction)

    def along(self, place: Vector) -> float:
        """Metres along the leg, from its point, to the foot of a place."""
        return float((place - self.point) @ self.direction)

    def beside(self, place: Vector) -> float:
        """Metres from the leg to a place, positive to the left."""
        away = place - self.point
        return float(away[1] * self.direction[0] - away[0] * self.direction[1])


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


def turn_of(a: Vector, b: Vector) -> float:
    """Angle from direction a to direction b, radians, positive to the left."""
    return math.atan2(a[0] * b[1] - a[1] * b[0], float(a @ b))


def vertex_row(corner: Vector, before: Rows, after: Rows) -> Rows:
    """Row of a corner's vertex: the properties of the row before it, the larger spread of both."""
    row = before.copy()
    row[[X, Y]] = corner
    heading = before[[TX, TY]] + after[[TX, TY]]
    row[[TX, TY]] = heading / max(float(np.hypot(*heading)), 1e-9)
    row[SIGMA] = max(before[SIGMA], after[SIGMA])
    row[FORM] = CORNER
    row[TRAVEL] = before[TRAVEL] + float(np.hypot(*(corner - before[[X, Y]])))
    return row


def hermite(a: Vector, ta: Vector, b: Vector, tb: Vector, step_m: float) -> Vector:
    """Inner points (n, 4: x, y, heading) of the cubic from a to b with unit tangents ta, tb, about step_m apart.

    Where both tangents fit one circular arc, the cubic follows that arc: the common choice of 4/3 tan(turn / 4) radii
    for the handles of a cubic arc.
    """
    reach = float(np.hypot(*(b - a)))
    turn = abs(turn_of(ta, tb))
    pull = reach * (1.0 if turn < 1e-3 else 2.0 * math.tan(turn / 4) / math.sin(turn / 2))
    u = np.linspace(0.0, 1.0, max(3, math.ceil(reach / step_m) + 1))[1:-1, None]
    points = (2 * u**3 - 3 * u**2 + 1) * a + (u**3 - 2 * u**2 + u) * pull * ta
    points = points + (3 * u**2 - 2 * u**3) * b + (u**3 - u**2) * pull * tb
    heading = (6 * u**2 - 6 * u) * (a - b) + (3 * u**2 - 4 * u + 1) * pull * ta + (3 * u**2 - 2 * u) * pull * tb
    return np.concatenate([points, heading / np.hypot(*heading.T)[:, None]], axis=1)
