"""Fewer vertices: chord error at most CHORD_M, a vertex at least every SPACING_M, corners and marked places kept."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

CHORD_M = 0.02
SPACING_M = 9.9
"""At most 10 m, less what the rounded scale of the working grid may be off."""
ROUNDING_M = 0.001
"""Coordinates are written to the millimetre; what rounding may add is taken off the allowed chord error."""


def breaks(along: NDArray[np.float64], *marks: NDArray[np.generic]) -> NDArray[np.int64]:
    """Return the points at which a line is cut into stretches that are alike and at most SPACING_M long.

    Parameters
    ----------
    along : (n,) distance along the line, metres.
    marks : (n,) arrays each; where a value changes from one point to the next, a stretch ends.

    Returns
    -------
    (k,) increasing indices, first 0, last n - 1.
    """
    last = len(along) - 1
    cuts = {0, last}
    for mark in marks:
        cuts.update((np.flatnonzero(mark[1:] != mark[:-1]) + 1).tolist())
    fixed = sorted(cuts)
    for start, stop in pairwise(fixed):
        cuts.update(_even(along, start, stop))
    return np.array(sorted(cuts), dtype=np.int64)


def keep(points: NDArray[np.float64], fixed: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return the vertices to keep: the fixed ones, and between them those that the chord error asks for.

    Method: Douglas and Peucker (1973), without recursion.

    Parameters
    ----------
    points : (n, 2) metres.
    fixed : increasing indices with 0 and n - 1 among them.
    """
    tolerance = CHORD_M - ROUNDING_M
    kept = set(fixed.tolist())
    open_runs = list(zip(fixed[:-1].tolist(), fixed[1:].tolist(), strict=True))
    while open_runs:
        start, stop = open_runs.pop()
        if stop - start < 2:
            continue
        away = _chord_distance(points[start + 1 : stop], points[start], points[stop])
        worst = int(np.argmax(away))
        if away[worst] > tolerance:
            middle = start + 1 + worst
            kept.add(middle)
            open_runs += [(start, middle), (middle, stop)]
    return np.array(sorted(kept), dtype=np.int64)


def quantum(scale: float) -> float:
    """Return the step to which coordinates are rounded, in CRS units: the power of ten nearest below 1 mm.

    Parameters
    ----------
    scale : ground metres per CRS unit.
    """
    return 10.0 ** math.floor(math.log10(1.5 * ROUNDING_M / scale))


def rounded(xy: NDArray[np.float64], scale: float) -> NDArray[np.float64]:
    """Round CRS coordinates to `quantum`."""
    return np.round(xy, -round(math.log10(quantum(scale)))) + 0.0


def _even(along: NDArray[np.float64], start: int, stop: int) -> list[int]:
    """Cut one run into equal parts none of which is longer than SPACING_M, at points that exist."""
    cuts, reached = [], start
    while along[stop] - along[reached] > SPACING_M:
        parts = math.ceil((along[stop] - along[reached]) / SPACING_M)
        wanted = along[reached] + (along[stop] - along[reached]) / parts
        nearest = int(np.searchsorted(along, wanted + 1e-9, side="right")) - 1
        reached = max(nearest, reached + 1)
        if reached >= stop:
            break
        cuts.append(reached)
    return cuts


def _chord_distance(
    points: NDArray[np.float64], start: NDArray[np.float64], stop: NDArray[np.float64]
) -> NDArray[np.float64]:
    chord = stop - start
    squared = float(chord @ chord)
    share = np.zeros(len(points)) if squared == 0 else np.clip((points - start) @ chord / squared, 0.0, 1.0)
    return np.hypot(*(points - start - share[:, None] * chord).T)
