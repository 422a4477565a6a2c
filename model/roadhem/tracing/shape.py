"""The followed points made one clean curve: corners sharp, noise between cells averaged away."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from roadhem.tracing.compiled import compiled
from roadhem.tracing.follow import FOLLOWED, FORM, TRAVEL, TX, TY, X, Y
from roadhem.tracing.legs import between, straight, turn_of, vertex_row
from roadhem.tracing.settings import Settings
from roadhem.tracing.stretch import Rows


def measured(rows: Rows) -> Rows:
    """Return the rows with TRAVEL as the length along them, from 0."""
    rows = rows.copy()
    rows[:, TRAVEL] = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(rows[:, [X, Y]], axis=0).T))])
    return rows


def sharpen(rows: Rows, settings: Settings) -> Rows:
    """Redraw turns that the fields rounded, but that are corners, as one vertex between two straights.

    Parameters
    ----------
    rows : with TRAVEL measured along them.
    """
    turns = _turns(rows, settings.sharpen_chord_m)
    order = np.argsort(-np.abs(turns), kind="stable")
    corners: list[tuple[float, Rows]] = []
    for k in order[np.abs(turns[order]) >= settings.sharpen_least]:
        at = rows[k, TRAVEL]
        if any(abs(at - other) < settings.sharpen_leg_m for other, _ in corners):
            continue
        for leg_m in (settings.corner_leg_m, settings.sharpen_leg_m):
            if (vertex := _corner_at(rows, int(k), leg_m, settings)) is not None:
                corners.append((at, vertex))
                break
    keep = np.ones(len(rows), bool)
    for at, _ in corners:
        keep &= np.abs(rows[:, TRAVEL] - at) >= settings.corner_blur_m
    merged = np.concatenate([rows[keep], *(vertex[None] for _, vertex in corners)])
    return merged[np.argsort(merged[:, TRAVEL], kind="stable")]


def _turns(rows: Rows, chord_m: float) -> NDArray[np.float64]:
    """Turn at each row between the chords before and after it; 0 near the ends and near corners drawn already."""
    s = rows[:, TRAVEL]
    before = np.stack([np.interp(s - chord_m, s, rows[:, c]) for c in (X, Y)], axis=-1)
    after = np.stack([np.interp(s + chord_m, s, rows[:, c]) for c in (X, Y)], axis=-1)
    a, b = rows[:, [X, Y]] - before, after - rows[:, [X, Y]]
    turns = np.arctan2(a[:, 0] * b[:, 1] - a[:, 1] * b[:, 0], np.sum(a * b, axis=1))
    turns[(s - chord_m < s[0]) | (s + chord_m > s[-1])] = 0.0
    for corner in s[rows[:, FORM] != FOLLOWED]:
        turns[np.abs(s - corner) < 2.0 * chord_m] = 0.0
    return turns


def _corner_at(rows: Rows, k: int, leg_m: float, settings: Settings) -> Rows | None:
    """The vertex at row k, if the line is straight on either side of it and turns there alone."""
    at, blur = rows[k, TRAVEL], settings.corner_blur_m
    before, after = between(rows[:k], blur, leg_m, at), between(rows[k + 1 :], blur, leg_m, at)
    if min(len(before), len(after)) < 3:
        return None
    one, two = straight(before), straight(after)
    turn = abs(turn_of(one.direction, two.direction))
    within = sum(
        abs(turn_of(straight(part[: len(part) // 2 + 1]).direction, straight(part[len(part) // 2 :]).direction))
        for part in (before, after)
    )
    corner = one.meets(two)
    if corner is None or turn < settings.sharpen_least or within > settings.sharpen_within * turn:
        return None
    if np.min(np.hypot(rows[:, X] - corner[0], rows[:, Y] - corner[1])) > settings.sharpen_off_m:
        return None
    row = vertex_row(corner, rows[k - 1], rows[k + 1])
    row[TRAVEL] = at
    return row


@compiled
def _smooth(rows, half, bend_half, out):  # type: ignore[no-untyped-def]
    """Move each followed row sideways onto the parabola through its neighbours, and take its heading from it."""
    for k in range(len(rows)):
        out[k] = rows[k]
        if rows[k, FORM] != FOLLOWED:
            continue
        x, y, tx, ty = rows[k, X], rows[k, Y], rows[k, TX], rows[k, TY]
        width = half
        for _ in range(2):
            moments = np.zeros(5)
            sums = np.zeros(3)
            for way in (-1, 1):
                j = k if way == 1 else k - 1
                while 0 <= j < len(rows) and rows[j, FORM] == FOLLOWED:
                    u = abs(rows[j, TRAVEL] - rows[k, TRAVEL]) / width
                    if u >= 1.0:
                        break
                    w = (1.0 - u**3) ** 3
                    s = (rows[j, X] - x) * tx + (rows[j, Y] - y) * ty
                    d = (rows[j, Y] - y) * tx - (rows[j, X] - x) * ty
                    for m in range(5):
                        moments[m] += w * s**m
                    for m in range(3):
                        sums[m] += w * d * s**m
                    j += way
            m0, m1, m2, m3, m4 = moments
            det = m0 * (m2 * m4 - m3 * m3) - m1 * (m1 * m4 - m2 * m3) + m2 * (m1 * m3 - m2 * m2)
            if det < 1e-9:
                break
            b0, b1, b2 = sums
            c0 = (b0 * (m2 * m4 - m3 * m3) - m1 * (b1 * m4 - m3 * b2) + m2 * (b1 * m3 - m2 * b2)) / det
            c1 = (m0 * (b1 * m4 - b2 * m3) - b0 * (m1 * m4 - m2 * m3) + m2 * (m1 * b2 - b1 * m2)) / det
            c2 = (m0 * (m2 * b2 - m3 * b1) - m1 * (m1 * b2 - m2 * b1) + b0 * (m1 * m3 - m2 * m2)) / det
            out[k, X], out[k, Y] = x - c0 * ty, y + c0 * tx
            length = math.sqrt(1.0 + c1 * c1)
            out[k, TX], out[k, TY] = (tx - c1 * ty) / length, (ty + c1 * tx) / length
            tight = bend_half / max(2.0 * abs(c2), 1e-9)
            if tight >= width:
                break
            width = max(tight, 0.5 * half)


def smooth(rows: Rows, closed: bool, settings: Settings) -> Rows:
    """Average the noise between cells along the line, without cutting corners.

    Each point moves onto the weighted parabola through its neighbours within `smooth_m` (half of it where the line
    bends most): locally weighted regression of second order. Corners, bridges and points given by hand are left alone
    and not looked across.

    Parameters
    ----------
    rows : with TRAVEL measured along them; where closed, the last row repeats the first.
    """
    out = np.empty_like(rows)
    if not closed:
        _smooth(rows, settings.smooth_m, settings.smooth_bend, out)
        return out
    whole = rows[-1, TRAVEL]
    lead = rows[:-1][whole - rows[:-1, TRAVEL] <= 2 * settings.smooth_m].copy()
    tail = rows[1:][rows[1:, TRAVEL] <= 2 * settings.smooth_m].copy()
    lead[:, TRAVEL] -= whole
    tail[:, TRAVEL] += whole
    around = np.concatenate([lead, rows, tail])
    out = np.empty_like(around)
    _smooth(around, settings.smooth_m, settings.smooth_bend, out)
    ring = out[len(lead) : len(lead) + len(rows)]
    ring[-1] = ring[0]
    ring[-1, TRAVEL] = whole
    return ring
