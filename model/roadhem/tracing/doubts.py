"""Places on a line where a person should look first."""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from roadhem.tracing.compiled import compiled
from roadhem.tracing.follow import BESIDE, CORNER, FORM, NEAR, SIGMA, TRAVEL, TX, TY, X, Y
from roadhem.tracing.legs import between, straight, turn_of
from roadhem.tracing.result import Doubt
from roadhem.tracing.ridge import buffer
from roadhem.tracing.settings import Settings
from roadhem.tracing.sheet import DX, DY, MISSING, NEARNESS, VALID, Sheet, sample
from roadhem.tracing.stretch import Rows


@compiled
def neighbours(table, origin, rows, every, asides, pace, found, values):  # type: ignore[no-untyped-def]
    """Look for another edge beside the line.

    Parameters
    ----------
    rows : with TRAVEL measured along them. every : metres between looks. asides : metres beside the line to look at.
    found : (n,) float64, filled with the distance of the nearest other edge, metres; infinite where there is none.
    """
    next_look = rows[0, TRAVEL]
    for k in range(len(rows)):
        found[k] = math.inf
        if rows[k, TRAVEL] < next_look:
            continue
        next_look = rows[k, TRAVEL] + every
        tx, ty = rows[k, TX], rows[k, TY]
        for d in asides:
            code = sample(table, origin, rows[k, X] - d * ty, rows[k, Y] + d * tx, values[0])
            if code == MISSING:
                return code
            if code != VALID or values[0, NEARNESS] < pace.present:
                continue
            away = d + values[0, DY] * tx - values[0, DX] * ty
            if away * d > 0.0 and abs(away) > 0.5 * abs(d) and abs(away) < found[k]:
                found[k] = abs(away)
    return VALID


def find_doubts(sheet: Sheet, rows: Rows, bridged: NDArray[np.bool_], settings: Settings) -> tuple[Doubt, ...]:
    """Doubts about a finished line, in order along it.

    Parameters
    ----------
    rows : with TRAVEL measured along them. bridged : where the edge itself is hidden.
    """
    found = np.zeros(len(rows))
    asides = np.array(settings.neighbour_asides_m)
    sheet.run(neighbours, rows, settings.neighbour_every_m, asides, settings.pace, found, buffer())
    weak = ~bridged & (rows[:, SIGMA] >= settings.doubt_sigma_m)
    beside = ~bridged & (rows[:, BESIDE] > rows[:, NEAR] + settings.doubt_beside)
    doubts = [
        *_bridges(rows, bridged, settings),
        *_stretches(rows, weak, rows[:, SIGMA] / (2.0 * settings.doubt_sigma_m), "low_contrast", settings),
        *_stretches(rows, beside, 0.3 + rows[:, BESIDE] - rows[:, NEAR], "competing_line", settings),
        *_other_edges(rows, found, settings),
        *_corners(rows, settings),
    ]
    return tuple(doubt for _, doubt in sorted(doubts, key=lambda pair: (pair[0], pair[1].reason)))


def _doubt(rows: Rows, k: int, reason: str, weight: float) -> tuple[float, Doubt]:
    x, y, at_m = (float(rows[k, column]) for column in (X, Y, TRAVEL))
    return at_m, Doubt(x, y, reason, round(min(max(weight, 0.0), 1.0), 3))


def _runs(mask: NDArray[np.bool_]) -> Iterator[tuple[int, int]]:
    edges = np.flatnonzero(np.diff(np.concatenate([[False], mask, [False]]).astype(np.int8)))
    yield from zip(edges[::2].tolist(), (edges[1::2] - 1).tolist(), strict=True)


def _bridges(rows: Rows, bridged: NDArray[np.bool_], settings: Settings) -> Iterator[tuple[float, Doubt]]:
    joined = bridged.copy()
    for before, after in itertools.pairwise(_runs(bridged)):
        if rows[after[0], TRAVEL] - rows[before[1], TRAVEL] < settings.doubt_least_m:
            joined[before[1] : after[0]] = True
    for first, last in _runs(joined):
        length = rows[last, TRAVEL] - rows[first, TRAVEL]
        yield _doubt(rows, (first + last) // 2, "bridged", 0.2 + length / 15.0)


def _stretches(
    rows: Rows, mask: NDArray[np.bool_], weight: NDArray[np.float64], reason: str, settings: Settings
) -> Iterator[tuple[float, Doubt]]:
    for first, last in _runs(mask):
        if rows[last, TRAVEL] - rows[first, TRAVEL] >= settings.doubt_least_m:
            worst = first + int(np.argmax(weight[first : last + 1]))
            yield _doubt(rows, worst, reason, float(np.mean(weight[first : last + 1])))


def _other_edges(rows: Rows, found: NDArray[np.float64], settings: Settings) -> Iterator[tuple[float, Doubt]]:
    """Edges that leave the line at an angle (forks) or run beside it; one doubt for each that goes on."""
    looks = np.flatnonzero(np.isfinite(found))
    apart = np.flatnonzero(np.diff(rows[looks, TRAVEL]) > 3.0 * settings.neighbour_every_m) + 1
    for group in np.split(looks, apart):
        if len(group) < 2:
            continue
        nearest = int(group[np.argmin(found[group])])
        spread, length = np.ptp(found[group]), np.ptp(rows[group, TRAVEL])
        if spread >= settings.fork_spread_m and spread >= settings.fork_slope * length:
            yield _doubt(rows, nearest, "fork", 0.5)
        else:
            yield _doubt(rows, nearest, "competing_line", 1.0 - float(found[nearest]) / 2.0)


def _corners(rows: Rows, settings: Settings) -> Iterator[tuple[float, Doubt]]:
    for k in 1 + np.flatnonzero(rows[1:-1, FORM] == CORNER):
        before = between(rows[:k], 0.0, settings.corner_leg_m, rows[k, TRAVEL])
        after = between(rows[k + 1 :], 0.0, settings.corner_leg_m, rows[k, TRAVEL])
        turn = abs(turn_of(straight(before).direction, straight(after).direction))
        yield _doubt(rows, int(k), "sharp_turn", 0.1 + 0.4 * turn / math.pi)
