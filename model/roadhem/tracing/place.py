"""From a click to the line it means."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from roadhem.tracing.compiled import compiled
from roadhem.tracing.follow import BESIDE, COLUMNS, LEFT, NEAR, RIGHT, TX, TY, X, Y, put_row
from roadhem.tracing.result import Unplaced
from roadhem.tracing.ridge import axis_at, buffer, lateral
from roadhem.tracing.scout import lines_at
from roadhem.tracing.settings import Pace, Settings
from roadhem.tracing.sheet import MISSING, NO_DATA, OUTSIDE, VALID, Sheet, sample

SOLVED_M = 1e-10
SOLVE_ITERATIONS = 40
ROUNDED = 6
"""Decimals (of a metre) to which a canonical point is rounded."""


def first_fix(
    sheet: Sheet, seed: NDArray[np.float64], radius_m: float, settings: Settings
) -> NDArray[np.float64] | Unplaced:
    """Row of the best place on a line within the radius of a click, or why there is none."""
    code = sheet.run(sample, seed[0], seed[1], np.zeros(14))
    if code == OUTSIDE:
        return Unplaced("The seed lies outside the tiles.")
    if code == NO_DATA:
        return Unplaced("The tiles hold no data at the seed.")
    reach = math.ceil(radius_m / settings.scout_m)
    steps = np.arange(-reach, reach + 1) * settings.scout_m
    grid = np.stack(np.meshgrid(steps, steps), axis=-1).reshape(-1, 2)
    places = seed + grid[np.hypot(grid[:, 0], grid[:, 1]) <= radius_m + 1e-9]
    rows = lines_at(sheet, places, settings)
    away = np.hypot(rows[:, X] - seed[0], rows[:, Y] - seed[1])
    rows, away = rows[(away <= radius_m) & (rows[:, NEAR] >= 0)], away[(away <= radius_m) & (rows[:, NEAR] >= 0)]
    within = f"within {radius_m:g} m of the seed"
    if len(rows) == 0 or rows[:, NEAR].max() < settings.sure:
        return Unplaced(f"No edge is sure enough {within}.")
    contrast = np.abs(rows[:, LEFT] - rows[:, RIGHT])
    fit = (rows[:, NEAR] >= settings.sure) & (contrast >= settings.contrast)
    if not fit.any():
        return Unplaced(f"Only a line with the same surface on both sides lies {within}.")
    score = rows[:, NEAR] - settings.scout_far * away / radius_m - settings.scout_other * rows[:, BESIDE]
    return rows[np.argmax(np.where(fit, score, -np.inf))]


@compiled
def solve(table, origin, x, y, upright, pace, values):  # type: ignore[no-untyped-def]
    """Where the line crosses a fixed line through (x, y), running north (upright) or east.

    Returns
    -------
    code : as `sample`. x, y : the crossing. solved : whether it was found to SOLVED_M.
    """
    for _ in range(SOLVE_ITERATIONS):
        code, tx, ty, clear = axis_at(table, origin, x, y, pace, values)
        if code != VALID or clear < pace.axis_clear:
            return code, x, y, False
        code, distance = lateral(table, origin, x, y, tx, ty, pace, values)
        across = tx if upright else -ty
        if code != VALID or abs(across) < 0.5 or abs(distance) > pace.reach:
            return code, x, y, False
        if upright:
            y += distance / across
        else:
            x += distance / across
        if abs(distance) < SOLVED_M:
            return code, x, y, True
    return VALID, x, y, False


@compiled
def crossings(table, origin, rows, lattice, pace, found, values):  # type: ignore[no-untyped-def]
    """Where a followed line crosses the lattice x = k * lattice, y = k * lattice at more than 45 degrees.

    Parameters
    ----------
    found : (m, 3) float64, filled with x, y, nearness.

    Returns
    -------
    code : as `sample`. count : crossings found.
    """
    count = 0
    for k in range(len(rows) - 1):
        a, b = rows[k], rows[k + 1]
        upright = abs(a[TX]) > abs(a[TY])
        axis = X if upright else Y
        if math.floor(a[axis] / lattice) == math.floor(b[axis] / lattice) or count >= len(found):
            continue
        line = lattice * max(math.floor(a[axis] / lattice), math.floor(b[axis] / lattice))
        share = (line - a[axis]) / (b[axis] - a[axis])
        if upright:
            code, x, y, solved = solve(table, origin, line, a[Y] + share * (b[Y] - a[Y]), True, pace, values)
        else:
            code, x, y, solved = solve(table, origin, a[X] + share * (b[X] - a[X]), line, False, pace, values)
        if code == MISSING:
            return code, count
        if solved and math.hypot(x - a[X], y - a[Y]) < 2.0 * pace.step_max:
            sample(table, origin, x, y, values[0])
            found[count, 0], found[count, 1], found[count, 2] = x, y, values[0, 0]
            count += 1
    return VALID, count


def canonical(sheet: Sheet, rows: NDArray[np.float64], settings: Settings) -> NDArray[np.float64] | None:
    """Row of the surest lattice crossing of a followed line: the same wherever the following began.

    Ties go to the western, then the southern crossing. None where the line crosses the lattice nowhere.
    """
    found = np.zeros((len(rows), 3))
    _, count = sheet.run(crossings, rows, settings.lattice_m, settings.pace, found, buffer())
    if count == 0:
        return None
    found = np.round(found[:count], ROUNDED)
    x, y, _ = found[np.lexsort((found[:, 1], found[:, 0], -np.round(found[:, 2], 3)))[0]]
    return row_at(sheet, float(x), float(y), settings.pace)


def row_at(sheet: Sheet, x: float, y: float, pace: Pace) -> NDArray[np.float64]:
    """Row for a place on the line, heading east (or north, where it runs north)."""
    values = buffer()
    _, tx, ty, _ = sheet.run(axis_at, x, y, pace, values)
    if tx < -1e-6 or (abs(tx) <= 1e-6 and ty < 0):
        tx, ty = -tx, -ty
    row = np.zeros(COLUMNS)
    sheet.run(put_row, row, x, y, tx, ty, values)
    return row
