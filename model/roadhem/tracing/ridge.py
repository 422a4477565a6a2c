"""Finding the line: the places where the offset's lateral component crosses zero."""

from __future__ import annotations

import math

import numpy as np

from roadhem.tracing.compiled import compiled
from roadhem.tracing.sheet import COS2, DX, DY, GEOMETRY, MISSING, NEARNESS, SIN2, VALID, sample

ITERATIONS = 8
SETTLED_M = 1e-3
"""A place that would move by less is on the line."""
STEADY_M = 0.05
"""A place that moved by less keeps its axis."""


@compiled
def axis_at(table, origin, x, y, pace, values):  # type: ignore[no-untyped-def]
    """Mean axis over a star of five samples one profile step apart.

    Parameters
    ----------
    values : (2, 14) float64; row 0 is left with the fields at the place itself.

    Returns
    -------
    code : as `sample`. tx, ty : unit vector, of either sense. clear : 0..1, length of the mean double-angle vector.
    """
    code = sample(table, origin, x, y, values[0, :GEOMETRY])
    if code != VALID:
        return code, 1.0, 0.0, 0.0
    c, s, total = values[0, COS2], values[0, SIN2], 1.0
    for k in range(4):
        dx = pace.profile * ((k == 0) - (k == 1))
        dy = pace.profile * ((k == 2) - (k == 3))
        code = sample(table, origin, x + dx, y + dy, values[1, :GEOMETRY])
        if code == MISSING:
            return code, 1.0, 0.0, 0.0
        if code == VALID:
            c += 0.5 * values[1, COS2]
            s += 0.5 * values[1, SIN2]
            total += 0.5
    theta = 0.5 * math.atan2(s, c)
    return VALID, math.cos(theta), math.sin(theta), math.hypot(c, s) / total


@compiled
def lateral(table, origin, x, y, tx, ty, pace, values):  # type: ignore[no-untyped-def]
    """Distance from a place to the line, measured to the left of the axis (tx, ty).

    Each of five samples across the axis tells where the line is; those that agree with the middle are averaged.

    Parameters
    ----------
    values : (2, 14) float64; row 0 must hold the fields at the place.

    Returns
    -------
    code : as `sample`. distance : metres.
    """
    nx, ny = -ty, tx
    middle = values[0, DX] * nx + values[0, DY] * ny
    total, weights = middle, 1.0
    for k in (-2, -1, 1, 2):
        d = k * pace.profile
        code = sample(table, origin, x + d * nx, y + d * ny, values[1, :GEOMETRY])
        if code == MISSING:
            return code, 0.0
        if code == VALID:
            found = d + values[1, DX] * nx + values[1, DY] * ny
            z = (found - middle) / pace.agree
            w = (0.6 if abs(k) == 2 else 0.9) * math.exp(-0.5 * z * z) * max(values[1, NEARNESS], 0.0)
            total += w * found
            weights += w
    return VALID, total / weights


@compiled
def settle(table, origin, x, y, hx, hy, pace, values):  # type: ignore[no-untyped-def]
    """Slide a place sideways onto the line.

    Parameters
    ----------
    hx, hy : heading, used for the sense of the axis and where the axis says nothing; (0, 0) to take the axis alone.

    Returns
    -------
    code : as `sample`. x, y : the place on the line. tx, ty : its axis, along the heading. clear : as `axis_at`.
    agree : cosine of the angle between axis and heading.
    """
    tx, ty, clear, agree, distance = hx, hy, 0.0, 1.0, pace.reach
    for _ in range(ITERATIONS):
        if abs(distance) > STEADY_M:
            code, ax, ay, clear = axis_at(table, origin, x, y, pace, values)
        else:
            code = sample(table, origin, x, y, values[0, :GEOMETRY])
        if code != VALID:
            return code, x, y, tx, ty, clear, agree
        agree = ax * hx + ay * hy
        if agree < 0.0:
            ax, ay, agree = -ax, -ay, -agree
        if (hx == 0.0 and hy == 0.0) or (clear >= pace.axis_clear and agree >= pace.turn_max):
            tx, ty = ax, ay
        else:
            tx, ty = hx, hy
        code, distance = lateral(table, origin, x, y, tx, ty, pace, values)
        if code != VALID:
            return code, x, y, tx, ty, clear, agree
        distance = min(max(distance, -pace.reach), pace.reach)
        x -= distance * ty
        y += distance * tx
        if abs(distance) < SETTLED_M:
            break
    code = sample(table, origin, x, y, values[0])
    return code, x, y, tx, ty, clear, agree


def buffer() -> np.ndarray:
    """Room for the fields at two places, as the loops need it."""
    return np.zeros((2, 14))
