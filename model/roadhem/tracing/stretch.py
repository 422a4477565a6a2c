"""Runs of rows: walked without a break, measured, fitted and turned."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from roadhem.tracing.follow import BEND, COLUMNS, FULL, LEFT, NEAR, RIGHT, SIDE, TRAVEL, TX, TY, X, Y, follow
from roadhem.tracing.ridge import buffer
from roadhem.tracing.settings import Settings
from roadhem.tracing.sheet import MISSING, Sheet

CAPACITY = 512

LANDED = 3
"""Rows kept of a line landed on beyond a corner or gap; following goes on from the last of them."""

Rows = NDArray[np.float64]
"""Rows as `follow` writes them, (n, COLUMNS), or one of them, (COLUMNS,)."""


class Walked(NamedTuple):
    """Rows after following; the code with which it stopped, and the row it met, as `follow` tells them."""

    rows: Rows
    code: int
    met: int


def walk_on(sheet: Sheet, rows: Rows, budget_m: float, settings: Settings) -> Walked:
    """Follow from the last of the rows until something stops it, at the latest at TRAVEL budget_m."""
    n = len(rows)
    most = math.ceil(max(budget_m - rows[-1, TRAVEL], 0.0) / settings.pace.step_min) + 2
    room = np.empty((n + min(most, CAPACITY), COLUMNS))
    room[:n] = rows
    values = buffer()
    while True:
        code, n, met = follow(sheet.table, sheet.origin, room, n, budget_m, settings.pace, values)
        if code == MISSING:
            sheet.fetch()
        elif code == FULL:
            room = np.concatenate([room, np.empty_like(room)])
        else:
            return Walked(room[:n], code, met)


def turned(rows: Rows) -> Rows:
    """Return rows the other way round: last first, each heading back; TRAVEL changes its sign."""
    rows = rows[::-1].copy()
    rows[:, [TX, TY, BEND, TRAVEL, SIDE]] *= -1.0
    rows[:, [LEFT, RIGHT]] = rows[:, [RIGHT, LEFT]]
    return rows


def side(rows: Rows) -> float:
    """Drive-over surface on the left minus that on the right, -1..1, mean over rows weighed by nearness."""
    weight = np.maximum(rows[:, NEAR], 1e-6)
    return float(np.sum(weight * (rows[:, LEFT] - rows[:, RIGHT])) / np.sum(weight))


@dataclass(frozen=True)
class Arc:
    """A circular arc (or straight) through (x, y) with heading (radians) and curvature to the left (1/m)."""

    x: float
    y: float
    heading: float
    bend: float

    def at(self, s: NDArray[np.float64] | float) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Places (..., 2) and headings (...) at arc lengths s from (x, y)."""
        s = np.asarray(s, np.float64)
        half = 0.5 * self.bend * s
        chord = s * np.sinc(half / np.pi)
        angle = self.heading + half
        places = np.stack([self.x + chord * np.cos(angle), self.y + chord * np.sin(angle)], axis=-1)
        return places, self.heading + 2.0 * half


STIFF = 0.2
"""Cubic metres by which a fitted arc is drawn towards a straight: 1 m of heading known to 0.05 rad against
curvatures of 0.11 1/m."""


def fit_arc(rows: Rows, memory_m: float) -> Arc:
    """Arc that fits the end of a run of rows, older rows counting less; it starts beside the last row.

    Headings are fitted as linear in arc length; then the arc is shifted sideways to the middle of the rows.
    """
    xy = rows[:, [X, Y]]
    steps = np.hypot(*np.diff(xy, axis=0).T)
    s = np.cumsum(steps) - np.sum(steps)
    middle = s - 0.5 * steps
    heading = np.unwrap(np.arctan2(*np.diff(xy, axis=0).T[::-1]))
    weight = steps * np.exp(middle / memory_m)
    bend, start = _line(middle, heading, weight, STIFF)
    for _ in range(2):
        arc = Arc(float(xy[-1, 0]), float(xy[-1, 1]), start, bend)
        places, headings = arc.at(s)
        aside = np.sum((xy[1:] - places) * np.stack([-np.sin(headings), np.cos(headings)], axis=-1), axis=1)
        slope, shift = _line(s, aside, weight)
        start += slope
    return Arc(float(xy[-1, 0]) - shift * math.sin(start), float(xy[-1, 1]) + shift * math.cos(start), start, bend)


def _line(
    x: NDArray[np.float64], y: NDArray[np.float64], w: NDArray[np.float64], stiff: float = 0.0
) -> tuple[float, float]:
    """Slope and value at 0 of the weighted least-squares line; `stiff` draws the slope to 0 (ridge regression)."""
    total = np.sum(w)
    mx, my = np.sum(w * x) / total, np.sum(w * y) / total
    spread = np.sum(w * (x - mx) ** 2) + stiff
    slope = np.sum(w * (x - mx) * (y - my)) / spread if spread > 1e-9 else 0.0
    return float(slope), float(my - slope * mx)
