"""Looking for lines around a place."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from roadhem.tracing.compiled import compiled
from roadhem.tracing.follow import COLUMNS, LEFT, NEAR, RIGHT, SIDE, TX, TY, X, Y, put_row
from roadhem.tracing.ridge import buffer, settle
from roadhem.tracing.settings import Settings
from roadhem.tracing.sheet import DX, DY, GEOMETRY, MISSING, NEARNESS, VALID, Sheet, sample
from roadhem.tracing.stretch import Rows

FAINT = 0.2
"""Nearness below which a place is not worth settling: no sure line within about a metre."""


@compiled
def settle_all(table, origin, places, headings, pace, rows, values):  # type: ignore[no-untyped-def]
    """Settle every place and fill its row; NEAR is -1 where there is no line, or only the end of one further on."""
    for k in range(len(places)):
        rows[k, NEAR] = -1.0
        code = sample(table, origin, places[k, 0], places[k, 1], values[0, :GEOMETRY])
        if code == MISSING:
            return code
        if code != VALID or values[0, NEARNESS] < FAINT:
            continue
        code, x, y, tx, ty, clear, _ = settle(
            table, origin, places[k, 0], places[k, 1], headings[k, 0], headings[k, 1], pace, values
        )
        along = values[0, DX] * tx + values[0, DY] * ty
        if code == VALID and clear >= pace.axis_clear and abs(along) <= pace.beyond:
            code = put_row(table, origin, rows[k], x, y, tx, ty, values)
        if code == MISSING:
            return code
    return VALID


def lines_at(
    sheet: Sheet, places: NDArray[np.float64], settings: Settings, headings: NDArray[np.float64] | None = None
) -> Rows:
    """Rows (n, COLUMNS) of the line beside each place (n, 2); NEAR is -1 where there is none.

    headings (n, 2) give the sense, and the direction where the axis says nothing.
    """
    rows = np.zeros((len(places), COLUMNS))
    headings = np.zeros_like(places) if headings is None else headings
    sheet.run(settle_all, places, headings, settings.pace, rows, buffer())
    return rows


def outward(rows: Rows, centre: NDArray[np.float64]) -> Rows:
    """Return the rows, each heading away from a place."""
    rows = rows.copy()
    inward = (rows[:, X] - centre[0]) * rows[:, TX] + (rows[:, Y] - centre[1]) * rows[:, TY] < 0
    rows[np.ix_(inward, [TX, TY, SIDE])] *= -1.0
    rows[np.ix_(inward, [LEFT, RIGHT])] = rows[np.ix_(inward, [RIGHT, LEFT])]
    return rows
