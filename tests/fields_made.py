"""Fields drawn from lines, as a net of fair skill would give them: the tracer's test ground."""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.ndimage import gaussian_filter
from scipy.spatial import cKDTree

from roadhem.fields.layout import (
    CELL_M,
    CHANNELS,
    COVER,
    COVER_NO_DATA,
    COVER_OUTSIDE,
    COVER_VALID,
    KINDS,
    NET_FIELDS,
    QUANTUM,
    REACH_M,
)

PAGE = 256
HALO = 10
DENSE_M = 0.04

Box = tuple[float, float, float, float]


def densify(line: ArrayLike, spacing: float = DENSE_M) -> NDArray[np.float64]:
    """Points along a polyline at most `spacing` apart."""
    line = np.asarray(line, np.float64)
    pieces = []
    for a, b in itertools.pairwise(line):
        count = max(1, math.ceil(float(np.hypot(*(b - a))) / spacing))
        pieces.append(a + (b - a) * (np.arange(count) / count)[:, None])
    return np.concatenate([*pieces, line[-1:]])


@dataclass(frozen=True)
class Edge:
    """A drive-over edge, the surface left of it (on both sides where `lane`)."""

    line: ArrayLike
    kind: str = "raised"
    lane: bool = False


@dataclass
class MadeFields:
    """Pages of fields drawn from edges.

    Attributes
    ----------
    edges, others : lines in grid metres.
    gaps : (x, y, radius): round places where nothing is seen.
    bounds : what the tiles cover, grid metres (minx, miny, maxx, maxy); None: everywhere.
    holes : boxes like `bounds` in which the tiles hold no data.
    peak : nearness on a well seen edge. blur_m : spread of the softening. noise_m : of the offsets, per cell.
    """

    edges: Sequence[Edge]
    others: Sequence[ArrayLike] = ()
    gaps: Sequence[tuple[float, float, float]] = ()
    bounds: Box | None = None
    holes: Sequence[Box] = ()
    peak: float = 0.9
    blur_m: float = 0.2
    noise_m: float = 0.0
    seed: int = 0

    def __post_init__(self) -> None:
        points, axes, kinds, lanes = [], [], [], []
        for edge in self.edges:
            dense = densify(edge.line)
            heading = np.diff(dense, axis=0)
            heading /= np.hypot(heading[:, 0], heading[:, 1])[:, None]
            points.append(0.5 * (dense[:-1] + dense[1:]))
            axes.append(heading)
            kinds.append(np.full(len(heading), KINDS.index(edge.kind)))
            lanes.append(np.full(len(heading), edge.lane))
        self._points = np.concatenate(points)
        self._axes, self._kinds, self._lanes = np.concatenate(axes), np.concatenate(kinds), np.concatenate(lanes)
        self._tree = cKDTree(self._points)
        self._others = cKDTree(np.concatenate([densify(o) for o in self.others])) if len(self.others) else None
        self._pages: dict[tuple[int, int], NDArray[np.int16]] = {}

    def page(self, p: int, q: int) -> NDArray[np.int16] | None:
        """Return the page, drawn at the first call."""
        if (p, q) not in self._pages:
            self._pages[p, q] = self._draw(p, q)
        return self._pages[p, q]

    def load(self, pages: object) -> None:
        """Do nothing: every page is at hand."""

    def _draw(self, p: int, q: int) -> NDArray[np.int16]:
        i = np.arange(p * PAGE - HALO, (p + 1) * PAGE + HALO)
        j = np.arange(q * PAGE - HALO, (q + 1) * PAGE + HALO)
        x, y = np.meshgrid((j + 0.5) * CELL_M, -(i + 0.5) * CELL_M)
        fields = self._fields(x, y, np.random.default_rng([self.seed, p & 0xFFFF, q & 0xFFFF]))
        crop = np.s_[:, HALO:-HALO, HALO:-HALO]
        fields, x, y = fields[crop], x[HALO:-HALO, HALO:-HALO], y[HALO:-HALO, HALO:-HALO]
        page = np.zeros((PAGE, PAGE, CHANNELS), np.int16)
        for c, name in enumerate(NET_FIELDS):
            page[..., c] = np.rint(fields[c] / QUANTUM.get(name, 1e-4))
        page[..., COVER] = COVER_VALID
        for x0, y0, x1, y1 in self.holes:
            page[(x > x0) & (x < x1) & (y > y0) & (y < y1), COVER] = COVER_NO_DATA
        if self.bounds is not None:
            x0, y0, x1, y1 = self.bounds
            page[(x < x0) | (x > x1) | (y < y0) | (y > y1), COVER] = COVER_OUTSIDE
            if np.all(page[..., COVER] == COVER_OUTSIDE):
                page[:] = 0
        return page

    def _fields(
        self, x: NDArray[np.float64], y: NDArray[np.float64], rng: np.random.Generator
    ) -> NDArray[np.float64]:
        place = np.stack([x, y], axis=-1)
        distance, nearest = self._tree.query(place, distance_upper_bound=REACH_M + 0.5)
        far = ~np.isfinite(distance)
        nearest[far] = 0
        offset = np.where(far[..., None], 0.0, self._points[nearest] - place)
        axis = self._axes[nearest]
        side = axis[..., 0] * -offset[..., 1] + axis[..., 1] * offset[..., 0]
        offset *= np.minimum(1.0, REACH_M / np.maximum(distance, 1e-9))[..., None]
        hide = np.zeros(x.shape)
        for gx, gy, radius in self.gaps:
            hide = np.maximum(hide, np.clip((radius - np.hypot(x - gx, y - gy)) / 0.3 + 0.5, 0.0, 1.0))
        fields = np.zeros((len(NET_FIELDS), *x.shape))
        at = {name: k for k, name in enumerate(NET_FIELDS)}
        fields[at["nearness"]] = np.clip(1.0 - distance / REACH_M, 0.0, 1.0) * self.peak * (1.0 - 0.95 * hide)
        if self._others is not None:
            away = self._others.query(place, distance_upper_bound=REACH_M)[0]
            fields[at["other"]] = self.peak * np.clip(1.0 - away / REACH_M, 0.0, 1.0)
        fields[at["dx"]], fields[at["dy"]] = offset[..., 0] * (1.0 - 0.8 * hide), offset[..., 1] * (1.0 - 0.8 * hide)
        fields[at["cos2"]] = axis[..., 0] ** 2 - axis[..., 1] ** 2
        fields[at["sin2"]] = 2.0 * axis[..., 0] * axis[..., 1]
        fields[at["log_sigma"]] = math.log(0.05) + 1.5 * hide
        for k, kind in enumerate(KINDS):
            fields[at[kind]] = self._kinds[nearest] == k
        fields[at["seen"]], fields[at["hidden"]] = 1.0 - hide, hide
        fields[at["surface"]] = np.where(self._lanes[nearest], 1.0, 0.05 + 0.9 * (side > 0))
        if self.noise_m:
            for name, scale in (("dx", 1.0), ("dy", 1.0), ("cos2", 2.0), ("sin2", 2.0), ("nearness", 1.0)):
                fields[at[name]] += rng.normal(0.0, scale * self.noise_m / 0.28 * self.blur_m / CELL_M, x.shape)
        return np.stack([gaussian_filter(f, self.blur_m / CELL_M) for f in fields]).clip(-3.0, 3.0)
