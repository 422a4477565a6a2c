"""Following the line step by step until something stops it."""

from __future__ import annotations

import math

from numba import njit

from roadhem.tracing.ridge import settle
from roadhem.tracing.sheet import (
    DX,
    DY,
    LOG_SIGMA,
    MISSING,
    NEARNESS,
    OTHER,
    RAISED,
    SEEN,
    SURFACE,
    VALID,
    sample,
)

FADED, ENDED, LOOPED, OVERLAP, LIMIT, FULL = range(4, 10)
"""Why following stopped, beside what `sample` may meet."""

X, Y, TX, TY, BEND, TRAVEL, SIGMA, KIND, SIGHT, NEAR, BESIDE, LEFT, RIGHT, COAST = (
    0, 1, 2, 3, 4, 5, 6, 7, 10, 13, 14, 15, 16, 17,
)  # fmt: skip
"""Columns of a row: place, heading, curvature to the left (1/m), metres travelled, standard error (m), three
probabilities of kind, three of sight, nearness, nearness of other lines, drive-over surface left and right, metres
since the line was last seen."""

COLUMNS = 18

SIDE_M = 0.6
"""How far left and right of the line the drive-over surface is read."""

_STRAY_M = 3.0


@njit(cache=True)
def put_row(table, origin, row, x, y, tx, ty, values):  # type: ignore[no-untyped-def]
    """Write place, heading and the fields read there into a row; returns a code as `sample`."""
    code = sample(table, origin, x, y, values[0])
    if code != VALID:
        return code
    row[X], row[Y], row[TX], row[TY] = x, y, tx, ty
    row[SIGMA] = math.exp(values[0, LOG_SIGMA])
    for k in range(3):
        row[KIND + k] = values[0, RAISED + k]
        row[SIGHT + k] = values[0, SEEN + k]
    row[NEAR], row[BESIDE] = values[0, NEARNESS], values[0, OTHER]
    for side in (1, -1):
        code = sample(table, origin, x - side * SIDE_M * ty, y + side * SIDE_M * tx, values[1])
        if code == MISSING:
            return code
        row[LEFT if side == 1 else RIGHT] = values[1, SURFACE] if code == VALID else 0.5
    return VALID


@njit(cache=True)
def predict(x, y, tx, ty, bend, step):  # type: ignore[no-untyped-def]
    """Place and heading one step further along an arc of curvature `bend`."""
    half = 0.5 * bend * step
    c, s = math.cos(half), math.sin(half)
    mx, my = tx * c - ty * s, tx * s + ty * c
    return x + step * mx, y + step * my, mx * c - my * s, mx * s + my * c


@njit(cache=True)
def along_itself(rows, n, earlier, x, y, tx, ty, travel, pace):  # type: ignore[no-untyped-def]
    """Whether a place lies on the line drawn so far, or on the other half of it."""
    near = pace.overlap * pace.overlap
    for k in range(n):
        row = rows[k]
        if travel - row[TRAVEL] < _STRAY_M:
            break
        if (row[X] - x) ** 2 + (row[Y] - y) ** 2 < near and abs(row[TX] * tx + row[TY] * ty) > 0.8:
            return True
    for k in range(len(earlier)):
        row = earlier[k]
        if travel + row[TRAVEL] < _STRAY_M:
            continue
        if (row[X] - x) ** 2 + (row[Y] - y) ** 2 < near and abs(row[TX] * tx + row[TY] * ty) > 0.8:
            return True
    return False


@njit(cache=True)
def advance(table, origin, last, pace, values):  # type: ignore[no-untyped-def]
    """Take one step from a row: predict along the arc, settle on the line, shorten where that disagrees.

    Returns
    -------
    code : as `sample`. x, y, tx, ty, step : the new place. seen : whether the line is really there.
    """
    step = pace.step_max
    if abs(last[BEND]) > 1e-6:
        step = min(max(math.sqrt(8.0 * pace.sagitta / abs(last[BEND])), pace.step_min), pace.step_max)
    while True:
        px, py, hx, hy = predict(last[X], last[Y], last[TX], last[TY], last[BEND], step)
        code, x, y, tx, ty, _ = settle(table, origin, px, py, hx, hy, pace, values)
        if code == MISSING:
            return code, x, y, tx, ty, step, False
        gate = pace.gate * (0.3 + 0.7 * step / pace.step_max)
        aside = math.hypot(x - px, y - py)
        smooth = code == VALID and aside <= gate and tx * hx + ty * hy >= pace.turn_soft
        if smooth or step <= pace.step_min:
            break
        step = max(0.5 * step, pace.step_min)
    if code != VALID:
        return code, x, y, tx, ty, step, False
    seen = aside <= gate and values[0, NEARNESS] >= pace.present
    if not seen:
        x, y, tx, ty = px, py, hx, hy
        code = sample(table, origin, x, y, values[0])
    return code, x, y, tx, ty, step, seen


@njit(cache=True)
def follow(table, origin, rows, n, budget, loop, earlier, pace, values):  # type: ignore[no-untyped-def]
    """Follow the line from the last row on.

    Parameters
    ----------
    rows : (capacity, COLUMNS) float64, the first n of them filled.
    budget : metres of travel allowed.
    loop : whether coming back to row 0 closes the line.
    earlier : (m, COLUMNS) rows of the other half, walked before.

    Returns
    -------
    code : why it stopped. n : rows filled now; after MISSING or FULL the call can be repeated with this n. stay :
        rows filled when a page was missed. The last row is one where the line was seen.
    """
    while True:
        if n >= len(rows):
            return FULL, n
        last = rows[n - 1]
        if last[TRAVEL] >= budget:
            return LIMIT, n
        code, x, y, tx, ty, step, seen = advance(table, origin, last, pace, values)
        if code == MISSING:
            return code, n
        if code != VALID:
            return code, n
        past = -(values[0, DX] * tx + values[0, DY] * ty)
        if past > pace.beyond and values[0, NEARNESS] >= pace.present:
            code = ENDED
        elif not seen and last[COAST] + step > pace.coast:
            code = FADED
        if code != VALID:
            while n > 1 and rows[n - 1, COAST] > 0.0:
                n -= 1
            return code, n
        row = rows[n]
        code = put_row(table, origin, row, x, y, tx, ty, values)
        if code != VALID:
            return code, n
        row[TRAVEL] = last[TRAVEL] + step
        row[COAST] = 0.0 if seen else last[COAST] + step
        row[BEND] = last[BEND]
        if seen:
            turn = math.atan2(last[TX] * ty - last[TY] * tx, last[TX] * tx + last[TY] * ty)
            fresh = 1.0 - math.exp(-step / pace.memory)
            bend = (1.0 - fresh) * last[BEND] + fresh * turn / step
            row[BEND] = min(max(bend, -pace.bend_max), pace.bend_max)
        n += 1
        if loop and row[TRAVEL] >= pace.loop_least:
            first = rows[0]
            gap = math.hypot(x - first[X], y - first[Y])
            if gap < pace.loop_close and first[TX] * tx + first[TY] * ty > 0.8:
                return LOOPED, n
        if along_itself(rows, n, earlier, x, y, tx, ty, row[TRAVEL], pace):
            return OVERLAP, n
