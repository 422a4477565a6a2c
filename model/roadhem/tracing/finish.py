"""From followed rows to a trace: direction, kinds, sight, spread, doubts."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from roadhem.fields.layout import SEEN
from roadhem.tracing.doubts import find_doubts
from roadhem.tracing.follow import BRIDGE, FORM, HAND, KIND, LEFT, RIGHT, SIGHT, SIGMA, TRAVEL, X, Y
from roadhem.tracing.result import Trace
from roadhem.tracing.settings import Settings
from roadhem.tracing.shape import measured, sharpen, smooth
from roadhem.tracing.sheet import Sheet
from roadhem.tracing.stretch import turned
from roadhem.tracing.walk import Line

BRIDGED, BY_HAND = SEEN.index("bridged"), SEEN.index("by_hand")


def oriented(line: Line) -> Line:
    """Return the line with the drive-over surface on its left."""
    if np.sum((line.rows[:, LEFT] - line.rows[:, RIGHT]) * spans(line.rows)) >= 0:
        return line
    return Line(turned(line.rows), line.end_reason, line.start_reason, line.closed)


def spans(rows: NDArray[np.float64]) -> NDArray[np.float64]:
    """Metres of line that each row stands for."""
    lengths = np.hypot(*np.diff(rows[:, [X, Y]], axis=0).T)
    return 0.5 * (np.append(lengths, 0.0) + np.insert(lengths, 0, 0.0))


def classes(probabilities: NDArray[np.float64], at_m: NDArray[np.float64], half_m: float) -> NDArray[np.uint8]:
    """Likeliest class along a line, averaged over a window; pieces shorter than half a window are absorbed."""
    low = np.searchsorted(at_m, at_m - half_m)
    high = np.searchsorted(at_m, at_m + half_m, side="right")
    total = np.concatenate([np.zeros((1, probabilities.shape[1])), np.cumsum(probabilities, axis=0)])
    chosen = np.argmax(total[high] - total[low], axis=1)
    starts = np.flatnonzero(np.diff(chosen, prepend=-1))
    ends = np.append(starts[1:], len(chosen))
    for start, end in zip(starts[1:], ends[1:], strict=True):
        if at_m[end - 1] - at_m[start] < half_m:
            chosen[start:end] = chosen[start - 1]
    return chosen.astype(np.uint8)


def finish(sheet: Sheet, line: Line, settings: Settings) -> Trace:
    """Return the trace of a followed line."""
    line = oriented(line)
    rows = np.concatenate([line.rows, line.rows[:1]]) if line.closed else line.rows
    rows = smooth(measured(sharpen(measured(rows), settings)), line.closed, settings)
    rows = measured(rows)
    seen = classes(rows[:, SIGHT : SIGHT + 3], rows[:, TRAVEL], settings.attributes_m)
    seen[rows[:, FORM] == BRIDGE] = BRIDGED
    seen[rows[:, FORM] == HAND] = BY_HAND
    return Trace(
        points=rows[:, [X, Y]].copy(),
        sigma=rows[:, SIGMA].copy(),
        kind=classes(rows[:, KIND : KIND + 3], rows[:, TRAVEL], settings.attributes_m),
        seen=seen,
        closed=line.closed,
        start_reason=line.start_reason,
        end_reason=line.end_reason,
        doubts=find_doubts(sheet, rows, seen == BRIDGED, settings),
    )
