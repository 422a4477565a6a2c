"""Following the line step by step until something stops it."""

from __future__ import annotations

import math

from roadhem.tracing.compiled import compiled
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

FADED, ENDED, BARE, LOOPED, OVERLAP, LIMIT, FULL = range(4, 11)
"""Why following stopped, beside what `sample` may meet: the line faded, was seen to end, divides no surface any
more, came back to itself in its own heading or against it, is as long as allowed, or fills the rows."""

X, Y, TX, TY, BEND, TRAVEL, SIGMA, KIND, SIGHT, NEAR, BESIDE, LEFT, RIGHT, SIDE, COAST, FORM = (
    0, 1, 2, 3, 4, 5, 6, 7, 10, 13, 14, 15, 16, 17, 18, 19,
)  # fmt: skip
"""Columns of a row: place, heading, curvature to the left (1/m), metres travelled, standard error (m), three
probabilities of kind, three of sight, nearness, nearness of other lines, drive-over surface left and right, running
mean of left minus right, metres since the line was last seen, and what the point is: one of the forms."""

COLUMNS = 20

FOLLOWED, CORNER, BRIDGE, HAND = range(4)
"""Forms of a point: found on the line, the vertex of a sharp corner, across a hidden stretch, given by a person."""

SIDE_M = 0.6
"""How far left and right of the line the drive-over surface is read."""


@compiled
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
    row[SIDE] = row[LEFT] - row[RIGHT]
    return VALID


@compiled
def predict(x, y, tx, ty, bend, step):  # type: ignore[no-untyped-def]
    """Place and heading one step further along an arc of curvature `bend`."""
    half = 0.5 * bend * step
    c, s = math.cos(half), math.sin(half)
    mx, my = tx * c - ty * s, tx * s + ty * c
    return x + step * mx, y + step * my, mx * c - my * s, mx * s + my * c


@compiled
def met(rows, n, pace):  # type: ignore[no-untyped-def]
    """Index of the row drawn long before on which the last of n rows lies, -1 if there is none."""
    here = rows[n - 1]
    for k in range(n - 1):
        row = rows[k]
        if here[TRAVEL] - row[TRAVEL] < pace.loop_least:
            break
        dx, dy = here[X] - row[X], here[Y] - row[Y]
        if abs(dx) > pace.step_max or abs(dy) > pace.step_max:
            continue
        along, aside = dx * row[TX] + dy * row[TY], dy * row[TX] - dx * row[TY]
        parallel = abs(row[TX] * here[TX] + row[TY] * here[TY]) > 0.8
        if parallel and abs(along) <= 0.6 * pace.step_max and abs(aside) <= pace.overlap:
            return k
    return -1


@compiled
def advance(table, origin, last, pace, values):  # type: ignore[no-untyped-def]
    """Take one step from a row: predict along the arc, settle on the line, shorten where that disagrees.

    Returns
    -------
    code : as `sample`. x, y, tx, ty, step : the new place. seen : whether the line is there and goes on in about this
        heading.
    """
    step = pace.step_max
    if abs(last[BEND]) > 1e-6:
        step = min(max(math.sqrt(8.0 * pace.sagitta / abs(last[BEND])), pace.step_min), pace.step_max)
    while True:
        px, py, hx, hy = predict(last[X], last[Y], last[TX], last[TY], last[BEND], step)
        code, x, y, tx, ty, clear, agree = settle(table, origin, px, py, hx, hy, pace, values)
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
    turns_off = clear >= pace.axis_clear and agree < pace.turn_max
    seen = aside <= gate and values[0, NEARNESS] >= pace.present and not turns_off
    if not seen:
        x, y, tx, ty = px, py, hx, hy
        code = sample(table, origin, x, y, values[0])
    return code, x, y, tx, ty, step, seen


@compiled
def end_row(table, origin, rows, n, x, y, pace, values):  # type: ignore[no-untyped-def]
    """Make the line end beside (x, y), where it was seen to end; returns a code as `sample`, and the rows there are.

    The last row is dropped where it lies past that place.
    """
    if n > 1 and (x - rows[n - 1, X]) * rows[n - 1, TX] + (y - rows[n - 1, Y]) * rows[n - 1, TY] < 0.0:
        n -= 1
    last = rows[n - 1]
    short = (x - last[X]) * last[TX] + (y - last[Y]) * last[TY]
    if short < 0.0 or short > 2.0 * pace.step_max:
        return VALID, n
    row = rows[n]
    x, y = last[X] + short * last[TX], last[Y] + short * last[TY]
    code = put_row(table, origin, row, x, y, last[TX], last[TY], values)
    if code != VALID:
        return code, n
    row[TRAVEL], row[COAST], row[BEND], row[FORM] = last[TRAVEL] + short, 0.0, last[BEND], last[FORM]
    row[SIDE] = last[SIDE]
    return VALID, n + 1


@compiled
def follow(table, origin, rows, n, budget, pace, values):  # type: ignore[no-untyped-def]
    """Follow the line from the last row on.

    Parameters
    ----------
    rows : (capacity, COLUMNS) float64, the first n of them filled, in order along the line.
    budget : TRAVEL at which to stop.

    Returns
    -------
    code : why it stopped; after MISSING or FULL the call can be repeated with the n returned. n : rows filled now.
        The last row is one where the line was seen, unless the tiles end there. k : with LOOPED and OVERLAP the row
        met in the same and in the opposite heading.
    """
    while True:
        if n >= len(rows):
            return FULL, n, -1
        last = rows[n - 1]
        if last[TRAVEL] >= budget:
            return LIMIT, n, -1
        code, x, y, tx, ty, step, seen = advance(table, origin, last, pace, values)
        if code == VALID:
            past = -(values[0, DX] * tx + values[0, DY] * ty)
            if past > pace.beyond and values[0, NEARNESS] >= pace.present:
                code = ENDED
            elif not seen and last[COAST] + step > pace.coast:
                code = FADED
            else:
                code = put_row(table, origin, rows[n], x, y, tx, ty, values)
        if code in (ENDED, FADED):
            while n > 1 and rows[n - 1, COAST] > 0.0:
                n -= 1
            if code == ENDED:
                x, y = x + values[0, DX], y + values[0, DY]
                missing, n = end_row(table, origin, rows, n, x, y, pace, values)
                if missing == MISSING:
                    code = MISSING
        if code != VALID:
            return code, n, -1
        row = rows[n]
        row[TRAVEL] = last[TRAVEL] + step
        row[COAST] = 0.0 if seen else last[COAST] + step
        row[FORM] = FOLLOWED
        turn = math.atan2(last[TX] * ty - last[TY] * tx, last[TX] * tx + last[TY] * ty) if seen else 0.0
        fresh = 1.0 - math.exp(-step / (pace.memory if seen else pace.memory_unseen))
        bend = (1.0 - fresh) * last[BEND] + fresh * turn / step
        row[BEND] = min(max(bend, -pace.bend_max), pace.bend_max)
        fresh = 1.0 - math.exp(-step / pace.side_memory)
        row[SIDE] = (1.0 - fresh) * last[SIDE] + fresh * row[SIDE]
        n += 1
        sense = 1.0 if rows[0, SIDE] >= 0.0 else -1.0
        if sense * row[SIDE] < pace.bare:
            while n > 1 and sense * (rows[n - 1, LEFT] - rows[n - 1, RIGHT]) < pace.dividing:
                n -= 1
            return BARE, n, -1
        k = met(rows, n, pace)
        if k >= 0:
            same = rows[k, TX] * tx + rows[k, TY] * ty > 0.0
            return LOOPED if same else OVERLAP, n, k
