"""Both ways along a line from one place on it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from roadhem.tracing.follow import (
    BEND,
    COLUMNS,
    ENDED,
    FADED,
    FULL,
    LEFT,
    LIMIT,
    LOOPED,
    OVERLAP,
    RIGHT,
    SIGHT,
    TRAVEL,
    TX,
    TY,
    follow,
)
from roadhem.tracing.ridge import buffer
from roadhem.tracing.settings import Settings
from roadhem.tracing.sheet import MISSING, NO_DATA, OUTSIDE, Sheet

REASON = {
    OUTSIDE: "tile_border",
    NO_DATA: "no_data",
    ENDED: "end",
    LOOPED: "looped",
    OVERLAP: "looped",
    LIMIT: "length_limit",
}

CAPACITY = 512


@dataclass(frozen=True)
class Line:
    """A line as followed: rows in order, with the reason at either end."""

    rows: NDArray[np.float64]
    start_reason: str
    end_reason: str
    closed: bool


def turned(row: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the row heading the other way."""
    row = row.copy()
    row[..., [TX, TY, BEND, TRAVEL]] *= -1.0
    row[..., [LEFT, RIGHT]] = row[..., [RIGHT, LEFT]]
    return row


def one_way(
    sheet: Sheet, start: NDArray[np.float64], budget_m: float, earlier: NDArray[np.float64], settings: Settings
) -> tuple[NDArray[np.float64], str, bool]:
    """Follow from a row on; rows (the start first), the reason it stopped, whether it closed."""
    rows, n = np.zeros((CAPACITY, COLUMNS)), 1
    rows[0] = start
    values = buffer()
    while True:
        code, n = follow(sheet.table, sheet.origin, rows, n, budget_m, True, earlier, settings.pace, values)
        if code == MISSING:
            sheet.fetch()
        elif code == FULL:
            rows = np.concatenate([rows, np.zeros_like(rows)])
        else:
            break
    rows = rows[:n]
    if code == FADED:
        return rows, "end" if rows[-1, SIGHT] > 0.5 else "unsure", False
    return rows, REASON[code], code == LOOPED


def both_ways(sheet: Sheet, start: NDArray[np.float64], limit_m: float, settings: Settings) -> Line:
    """Follow from a row in its heading, then the other way, `limit_m` in all."""
    start = start.copy()
    start[TRAVEL] = 0.0
    rows, end_reason, closed = one_way(sheet, start, 0.5 * limit_m, np.zeros((0, COLUMNS)), settings)
    if closed:
        return Line(rows, "looped", "looped", True)
    back, start_reason, _ = one_way(sheet, turned(start), 0.5 * limit_m, rows, settings)
    return Line(np.concatenate([turned(back[:0:-1]), rows]), start_reason, end_reason, False)
