"""A session over fields that are drawn, for tests of jobs that need neither files of tiles nor a net."""

from __future__ import annotations

import time
from dataclasses import dataclass, field

import numpy as np
import pyproj
from fields_made import Edge, MadeFields
from numpy.typing import NDArray

from roadhem.jobs.session import Inputs
from roadhem.tiles.grid import WorkingGrid
from roadhem.tiles.mosaic import Patch
from roadhem.tracing.result import Trace, Unplaced
from roadhem.tracing.trace import trace_seed

EAST, NORTH = 500_000.0, 5_600_000.0
STREETS = 4


def streets() -> list[Edge]:
    """Gently winding edges 12 m apart, each 90 m long, surface left."""
    x = np.linspace(5, 95, 200)
    return [Edge(np.stack([EAST + x, NORTH - 12 - 12 * n + 2 * np.sin(x / 15 + n)], 1)) for n in range(STREETS)]


def on_street(number: int, x: float) -> tuple[float, float]:
    """A place on a street, x metres from the west."""
    return EAST + x, NORTH - 12 - 12 * number + 2 * np.sin(x / 15 + number)


@dataclass
class MadeSession:
    """Drawn fields of the streets; counts what it traces."""

    slow_s: float = 0.0
    crs: pyproj.CRS = field(default_factory=lambda: pyproj.CRS.from_epsg(25832))
    grid: WorkingGrid = field(default_factory=WorkingGrid)
    model_name: str = "made"
    model_hash: str = "0" * 64
    faults: list[str] = field(default_factory=list)
    warnings: list[str] = field(default_factory=list)
    bounds_m: tuple[float, float, float, float] = (EAST, NORTH - 70, EAST + 100, NORTH)
    traced: int = 0

    def __post_init__(self) -> None:
        self._view = MadeFields(streets(), bounds=self.bounds_m)

    def source_at(self, x_m: float, y_m: float) -> tuple[str, str]:
        """The only tile."""
        return "made.tif", "2024-06-01"

    def covers(self, x_m: float, y_m: float, reach_m: float = 0.0) -> bool:
        """Within the bounds."""
        minx, miny, maxx, maxy = self.bounds_m
        return minx - reach_m <= x_m <= maxx + reach_m and miny - reach_m <= y_m <= maxy + reach_m

    def read(self, row: int, col: int, rows: int, cols: int) -> Patch:
        """Grey."""
        colour = np.full((3, rows, cols), 0.5, np.float32)
        return Patch(colour, np.full((rows, cols), 2, np.uint8), None)

    def fields(self, p: int, q: int) -> NDArray[np.int16]:
        """A page."""
        page = self._view.page(p, q)
        assert page is not None
        return page

    def warm(self, places: NDArray[np.float64]) -> None:
        """Nothing to do: drawn fields are at hand."""

    def trace(self, points: NDArray[np.float64]) -> Trace | Unplaced:
        """The real tracer."""
        self.traced += 1
        time.sleep(self.slow_s)
        return trace_seed(self._view, [(float(x), float(y)) for x, y in points])

    def computed_pixels(self) -> int:
        """One page a trace."""
        return self.traced * 512**2


def open_made(inputs: Inputs) -> MadeSession:
    """Open the streets."""
    return MadeSession()


def open_slow(inputs: Inputs) -> MadeSession:
    """Open streets on which a trace takes its time."""
    return MadeSession(slow_s=0.15)
