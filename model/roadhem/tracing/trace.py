"""Tracing one seed: a pure function of frozen fields."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from roadhem.errors import RoadhemError
from roadhem.tracing.finish import finish
from roadhem.tracing.follow import LIMIT, TRAVEL, X, Y
from roadhem.tracing.guide import guided
from roadhem.tracing.place import canonical, first_fix
from roadhem.tracing.result import Trace, Unplaced
from roadhem.tracing.settings import SETTINGS, Settings
from roadhem.tracing.sheet import Absent, FieldView, Sheet
from roadhem.tracing.stretch import Rows
from roadhem.tracing.walk import Line, Run, plain, whole

LIMIT_M = 2000.0

LOOK_M = 60.0
"""Metres beyond a line's reach that may be looked at: across a gap, round a corner."""


@dataclass(frozen=True)
class Missing:
    """An attempt that needs pages which are not computed yet; load them and attempt again."""

    pages: frozenset[tuple[int, int]]


class Store(FieldView, Protocol):
    """Fields that can be computed."""

    def load(self, pages: Iterable[tuple[int, int]]) -> None:
        """Compute these pages."""


def attempt(
    view: FieldView,
    points: Sequence[tuple[float, float]],
    *,
    radius_m: float = 1.0,
    limit_m: float = LIMIT_M,
    settings: Settings = SETTINGS,
) -> Trace | Unplaced | Missing:
    """Trace the edge beside a seed, as far as the pages at hand allow.

    Parameters
    ----------
    view : the fields.
    points : grid metres; the seed, then the places the line is to be guided through, in order.
    radius_m : metres around the seed within which the line passes.
    limit_m : metres, the longest line.

    Returns
    -------
    The trace; why there is none; or the pages without which neither can be told.
    """
    places = np.asarray(points, np.float64).reshape(-1, 2)
    sheet = Sheet(view, places, limit_m + radius_m + LOOK_M)
    try:
        line = follow_seed(sheet, places[0], radius_m, limit_m, settings)
        if isinstance(line, Unplaced):
            return line
        if len(places) > 1:
            line = guided(sheet, line, places[0], places[1:], limit_m, settings)
        return finish(sheet, line, settings)
    except Absent as absent:
        return Missing(frozenset([absent.page]))


def follow_seed(
    sheet: Sheet, seed: NDArray[np.float64], radius_m: float, limit_m: float, settings: Settings
) -> Line | Unplaced:
    """Follow the line beside a seed from its canonical point, so that the seed's exact place does not matter."""
    fix = first_fix(sheet, seed, radius_m, settings)
    if isinstance(fix, Unplaced):
        return fix
    start, run = fix, plain(sheet, fix, limit_m, settings)
    for _ in range(2):
        better = canonical(sheet, near_part(run, seed, settings), settings)
        if better is None or np.array_equal(better[:2], start[:2]):
            break
        start, run = better, plain(sheet, better, limit_m, settings)
    line = whole(sheet, run, limit_m, settings)
    if not passes(line, seed, radius_m):
        line = whole(sheet, plain(sheet, fix, limit_m, settings), limit_m, settings)
    if line.length_m < settings.least_m:
        return Unplaced("The edge beside the seed is lost within a metre; click where more of it is seen.")
    return line


def near_part(run: Run, seed: NDArray[np.float64], settings: Settings) -> Rows:
    """Rows in which the canonical point is looked for: all, or those near the seed where the limit cut the line."""
    rows = run.ahead.rows
    if LIMIT not in (run.start_code, run.ahead.code):
        return rows
    nearest = int(np.argmin(np.hypot(rows[:, X] - seed[0], rows[:, Y] - seed[1])))
    return rows[np.abs(rows[:, TRAVEL] - rows[nearest, TRAVEL]) <= settings.around_m]


def passes(line: Line, seed: NDArray[np.float64], radius_m: float) -> bool:
    """Whether the line passes within the radius of the seed."""
    a, b = line.rows[:-1, [X, Y]], line.rows[1:, [X, Y]]
    along = b - a
    share = np.sum((seed - a) * along, axis=1) / np.maximum(np.sum(along**2, axis=1), 1e-12)
    foot = a + np.clip(share, 0.0, 1.0)[:, None] * along
    return bool(np.min(np.hypot(*(foot - seed).T), initial=np.inf) <= radius_m)


def trace_seed(
    store: Store,
    points: Sequence[tuple[float, float]],
    *,
    radius_m: float = 1.0,
    limit_m: float = LIMIT_M,
    settings: Settings = SETTINGS,
) -> Trace | Unplaced:
    """Trace the edge beside a seed, computing the fields it needs; parameters as `attempt`.

    Raises
    ------
    RoadhemError
        If the store cannot give a page that it was asked to load.
    """
    loaded: set[tuple[int, int]] = set()
    while True:
        result = attempt(store, points, radius_m=radius_m, limit_m=limit_m, settings=settings)
        if not isinstance(result, Missing):
            return result
        if result.pages <= loaded:
            raise RoadhemError("The fields do not fit the memory set for them; give them more.")
        store.load(sorted(result.pages))
        loaded |= result.pages
