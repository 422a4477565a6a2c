"""Rows across a stretch where the line itself is not seen."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from roadhem.tracing.follow import (
    BESIDE,
    BRIDGE,
    COLUMNS,
    FORM,
    KIND,
    LEFT,
    RIGHT,
    SIDE,
    SIGHT,
    SIGMA,
    TRAVEL,
    TX,
    TY,
    X,
    Y,
)
from roadhem.tracing.settings import Settings
from roadhem.tracing.stretch import LANDED, Rows

MIXED = [*range(KIND, KIND + 3), BESIDE, LEFT, RIGHT, SIDE, SIGMA]


def span_rows(span: NDArray[np.float64], before: Rows, after: Rows, settings: Settings) -> Rows:
    """Rows at places (n, 4: x, y, heading) between two rows.

    Properties lie between those of the ends; the spread grows with the distance from the nearer one.
    """
    rows = np.zeros((len(span), COLUMNS))
    rows[:, [X, Y, TX, TY]] = span
    ends = np.concatenate([before[None, [X, Y]], span[:, :2], after[None, [X, Y]]])
    s = np.cumsum(np.hypot(*np.diff(ends, axis=0).T))
    share = (s[:-1] / s[-1])[:, None]
    rows[:, MIXED] = (1 - share) * before[MIXED] + share * after[MIXED]
    nearer = np.minimum(s[:-1], s[-1] - s[:-1])
    rows[:, SIGMA] = np.hypot(rows[:, SIGMA], settings.bridge_spread * nearer)
    rows[:, SIGHT + 2] = 1.0
    rows[:, TRAVEL] = before[TRAVEL] + s[:-1]
    rows[:, FORM] = BRIDGE
    return rows


def linked(before: Rows, span: Rows, after: Rows) -> Rows:
    """Rows before a stretch, across it, and the first few beyond, from which following goes on."""
    rest = after[:LANDED].copy()
    step = np.hypot(*(rest[0, [X, Y]] - span[-1, [X, Y]]))
    rest[:, TRAVEL] += span[-1, TRAVEL] + step - rest[0, TRAVEL]
    return np.concatenate([before, span, rest])
