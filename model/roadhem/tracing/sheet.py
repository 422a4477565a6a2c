"""Reading fields from pages that may not be there yet."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any, Protocol

import numpy as np
from numba import carray, types
from numba.extending import intrinsic
from numpy.typing import NDArray

from roadhem.fields.layout import CELL_M, CHANNELS, COVER, COVER_OUTSIDE, COVER_VALID, NET_FIELDS, QUANTUM
from roadhem.tracing.compiled import compiled

PAGE = 256
"""Cells along a page's side."""

PAGE_M = PAGE * CELL_M

VALID, OUTSIDE, NO_DATA, MISSING = 0, 1, 2, 3
"""What reading a place may meet."""

NEARNESS, OTHER, DX, DY, COS2, SIN2, LOG_SIGMA, RAISED, LOWERED, FLUSH, SEEN, SHADOW, HIDDEN, SURFACE = range(
    len(NET_FIELDS)
)

GEOMETRY = 6
"""Fields, from the first on, that say where the line is."""

_UNIT = np.array([QUANTUM.get(name, 1e-4) for name in NET_FIELDS])


class FieldView(Protocol):
    """Anything that hands out pages of fields."""

    def page(self, p: int, q: int) -> NDArray[np.int16] | None:
        """Return the (256, 256, CHANNELS) page, or None where it is not computed yet."""


class Absent(Exception):
    """Raised where a page is needed that is not there."""

    def __init__(self, page: tuple[int, int]) -> None:
        super().__init__(f"page {page} is not computed yet")
        self.page = page


class Sheet:
    """The pages around a trace, as a table of addresses that compiled loops read.

    Pages are asked for when a loop first meets them. The sheet keeps them alive as long as it lives.

    Attributes
    ----------
    table : (rows, columns) int64, addresses of pages, 0 where not asked for yet.
    origin : (4,) int64: page row and column of table[0, 0]; page row and column last missed.
    """

    def __init__(self, view: FieldView, points: NDArray[np.float64], around_m: float) -> None:
        low = points.min(axis=0) - around_m
        high = points.max(axis=0) + around_m
        p0, q0 = math.floor(-high[1] / PAGE_M), math.floor(low[0] / PAGE_M)
        p1, q1 = math.floor(-low[1] / PAGE_M), math.floor(high[0] / PAGE_M)
        self.table = np.zeros((p1 - p0 + 1, q1 - q0 + 1), np.int64)
        self.origin = np.array([p0, q0, 0, 0], np.int64)
        self._view = view
        self._pages: dict[tuple[int, int], NDArray[np.int16]] = {}

    def run(self, loop: Callable[..., Any], *arguments: Any) -> Any:
        """Call a compiled loop, fetching the pages it misses; its result, or result's first item, is a code."""
        while True:
            result = loop(self.table, self.origin, *arguments)
            code = result[0] if isinstance(result, tuple) else result
            if code != MISSING:
                return result
            self.fetch()

    def fetch(self) -> None:
        """Fetch the page last missed."""
        p, q = int(self.origin[2]), int(self.origin[3])
        self.table[p - self.origin[0], q - self.origin[1]] = self._page(p, q).ctypes.data

    def _page(self, p: int, q: int) -> NDArray[np.int16]:
        if (p, q) not in self._pages:
            page = self._view.page(p, q)
            if page is None:
                raise Absent((p, q))
            self._pages[p, q] = np.ascontiguousarray(page, np.int16)
        return self._pages[p, q]

    def cells(self, i0: int, i1: int, j0: int, j1: int) -> NDArray[np.int16]:
        """Cells of rows [i0, i1) and columns [j0, j1), (rows, columns, CHANNELS) int16."""
        out = np.empty((i1 - i0, j1 - j0, CHANNELS), np.int16)
        for p in range(i0 // PAGE, (i1 - 1) // PAGE + 1):
            for q in range(j0 // PAGE, (j1 - 1) // PAGE + 1):
                a, b = max(i0, p * PAGE), min(i1, (p + 1) * PAGE)
                c, d = max(j0, q * PAGE), min(j1, (q + 1) * PAGE)
                page = self._page(p, q)[a - p * PAGE : b - p * PAGE, c - q * PAGE : d - q * PAGE]
                out[a - i0 : b - i0, c - j0 : d - j0] = page
        return out


@intrinsic
def _pointer(typing_context: Any, address: Any) -> Any:
    def build(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        return builder.inttoptr(arguments[0], context.get_value_type(signature.return_type))

    return types.CPointer(types.int16)(types.int64), build


@compiled
def sample(table, origin, x, y, out):  # type: ignore[no-untyped-def]
    """Interpolate fields at a place, bilinearly over valid cells alone.

    Parameters
    ----------
    table, origin : of a Sheet; a missed page is left in origin[2:].
    x, y : grid metres.
    out : (n,) float64, filled with the first n of NET_FIELDS where the answer is VALID.

    Returns
    -------
    VALID, OUTSIDE, NO_DATA (what the cell around the place holds, if it is not valid) or MISSING.
    """
    u, v = x / CELL_M - 0.5, -y / CELL_M - 0.5
    j0, i0 = math.floor(u), math.floor(v)
    fu, fv = u - j0, v - i0
    out[:] = 0.0
    weight = 0.0
    here = COVER_OUTSIDE
    address = 0
    for a in range(2):
        for b in range(2):
            i, j = i0 + a, j0 + b
            if address == 0 or i & 255 == 0 or j & 255 == 0 or (b == 0 and j & 255 == 255):
                row, column = (i >> 8) - origin[0], (j >> 8) - origin[1]
                if row < 0 or column < 0 or row >= table.shape[0] or column >= table.shape[1]:
                    address = 0
                    continue
                address = table[row, column]
                if address == 0:
                    origin[2], origin[3] = i >> 8, j >> 8
                    return MISSING
            page = carray(_pointer(address), (PAGE * PAGE * CHANNELS,))
            base = ((i & 255) * PAGE + (j & 255)) * CHANNELS
            cover = page[base + COVER]
            if (a == 1) == (fv >= 0.5) and (b == 1) == (fu >= 0.5):
                here = cover
            if cover == COVER_VALID:
                w = (fv if a else 1.0 - fv) * (fu if b else 1.0 - fu)
                weight += w
                for c in range(len(out)):
                    out[c] += w * page[base + c]
    if here != COVER_VALID:
        return OUTSIDE if here == COVER_OUTSIDE else NO_DATA
    for c in range(len(out)):
        out[c] *= _UNIT[c] / weight
    return VALID
