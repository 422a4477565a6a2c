"""Both ways along a line from one place on it."""

from __future__ import annotations

from dataclasses import dataclass
from functools import partial

import numpy as np

from roadhem.fields.layout import NET_FIELDS
from roadhem.tracing.bridge import bridge
from roadhem.tracing.corner import turn_corner
from roadhem.tracing.follow import BARE, ENDED, FADED, LIMIT, LOOPED, OVERLAP, TRAVEL, TX, TY, X, Y, met
from roadhem.tracing.settings import Settings
from roadhem.tracing.sheet import NO_DATA, OUTSIDE, SEEN, VALID, Sheet, sample
from roadhem.tracing.stretch import Rows, Walked, turned, walk_on

STOPPED = (ENDED, FADED, BARE)
"""How following stops where a corner or a gap may lie."""

REASON = {
    OUTSIDE: "tile_border",
    NO_DATA: "no_data",
    ENDED: "end",
    LOOPED: "looped",
    OVERLAP: "looped",
    LIMIT: "length_limit",
}


@dataclass(frozen=True)
class Line:
    """A line as followed: rows in order, with the reason at either end."""

    rows: Rows
    start_reason: str
    end_reason: str
    closed: bool

    @property
    def length_m(self) -> float:
        """Length in metres."""
        return float(np.sum(np.hypot(*np.diff(self.rows[:, [X, Y]], axis=0).T)))


@dataclass(frozen=True)
class Run:
    """What following gave both ways from the row with TRAVEL 0, and the code with which its start stopped."""

    ahead: Walked
    start_code: int


def plain(sheet: Sheet, start: Rows, limit_m: float, settings: Settings) -> Run:
    """Follow from a row both ways, `limit_m` in all, without a look round corners or across gaps."""
    start = start[None].copy()
    start[:, TRAVEL] = 0.0
    ahead = walk_on(sheet, start, 0.5 * limit_m, settings)
    if ahead.code == LOOPED:
        return Run(ahead, ahead.code)
    back = walk_on(sheet, turned(ahead.rows), 0.5 * limit_m, settings)
    return Run(ahead._replace(rows=turned(back.rows)), back.code)


def further(sheet: Sheet, walked: Walked, budget_m: float, settings: Settings) -> tuple[Walked, str]:
    """Carry on round corners and across gaps from where following stopped; the rows, and why the line stops."""
    while walked.code in STOPPED:
        onward = _onward(sheet, walked, budget_m, settings)
        if onward is None:
            return _stopped(sheet, walked, settings)
        walked = onward
    return walked, REASON[walked.code]


def _onward(sheet: Sheet, walked: Walked, budget_m: float, settings: Settings) -> Walked | None:
    """Follow on round a corner or across a gap; None where neither leads farther."""
    least = walked.rows[-1, TRAVEL] + settings.pace.step_max
    for find in (turn_corner, partial(bridge, ended=walked.code == ENDED)):
        rows = find(sheet, walked.rows, settings)
        if rows is None or rows[-1, TRAVEL] < least:
            continue
        onward = _come_round(walked.rows, rows, settings) or walk_on(sheet, rows, budget_m, settings)
        if onward.code not in STOPPED or onward.rows[-1, TRAVEL] >= least:
            return onward
    return None


def _come_round(old: Rows, rows: Rows, settings: Settings) -> Walked | None:
    """What following would have given where rows put on round a corner or across a gap lie on the line's own."""
    common = min(len(old), len(rows))
    fresh = int(np.argmin(np.append(np.all(old[:common, [X, Y]] == rows[:common, [X, Y]], axis=1), False)))
    for n in range(fresh + 1, len(rows) + 1):
        k = met(rows, n, settings.pace)
        if k >= 0:
            same = rows[k, [TX, TY]] @ rows[n - 1, [TX, TY]] > 0
            return Walked(rows[:n], LOOPED if same else OVERLAP, k)
    return None


def _stopped(sheet: Sheet, walked: Walked, settings: Settings) -> tuple[Walked, str]:
    """The rows, and why they end where nothing goes on; they are drawn out to the border where that is just ahead.

    An edge that fades where it would be seen ends; one that would be hidden or in shadow may go on unseen.
    """
    end, values = walked.rows[-1], np.zeros(len(NET_FIELDS))
    reach = settings.pace.coast + settings.pace.step_max
    for ahead in np.arange(settings.pace.step_min, reach, settings.pace.step_min):
        x, y = end[[X, Y]] + ahead * end[[TX, TY]]
        code = sheet.run(sample, x, y, values)
        if code != VALID:
            drawn = end.copy()
            drawn[[X, Y]] += (ahead - settings.pace.step_min) * end[[TX, TY]]
            drawn[TRAVEL] += ahead - settings.pace.step_min
            return walked._replace(rows=np.concatenate([walked.rows, drawn[None]]), code=code), REASON[code]
    return walked, "end" if walked.code == ENDED or values[SEEN] > 0.5 else "unsure"


def whole(sheet: Sheet, run: Run, limit_m: float, settings: Settings) -> Line:
    """Carry what following gave both ways on as far as it goes, `limit_m` in all."""
    ahead, end_reason = further(sheet, run.ahead, 0.5 * limit_m, settings)
    rows = ahead.rows
    if ahead.code == LOOPED and rows[ahead.met, TRAVEL] - rows[0, TRAVEL] <= settings.loop_tail_m:
        return Line(_ring(rows, ahead.met), "looped", "looped", True)
    back, start_reason = further(sheet, Walked(turned(rows), run.start_code, -1), 0.5 * limit_m, settings)
    return Line(turned(back.rows), start_reason, end_reason, False)


def _ring(rows: Rows, met: int) -> Rows:
    """Rows of a loop, each place once, beginning at the row with TRAVEL 0, or the first after it."""
    ring = rows[met:-1]
    begin = int(np.argmax(ring[:, TRAVEL] >= 0.0))
    return np.concatenate([ring[begin:], ring[:begin]])
