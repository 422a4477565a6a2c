"""A session: the tiles of a run with a model over them, ready to trace."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Protocol

import numpy as np
import pyproj
from numpy.typing import NDArray

from roadhem.fields.layout import CELL_M, NET_STRIDE
from roadhem.tiles.grid import PIXEL_M, WorkingGrid
from roadhem.tracing.result import Trace, Unplaced

if TYPE_CHECKING:
    from roadhem.fields.store import FieldStore
    from roadhem.tiles.mosaic import Patch

PAGE = 256
PAGE_M = PAGE * CELL_M
"""Side of a page of fields, ground metres."""


@dataclass(frozen=True)
class Inputs:
    """What a run reads; cheap to send to another process.

    Attributes
    ----------
    tiles, height : raster files. crs : for tiles without one. model : its folder. threads : of the net.
    """

    tiles: tuple[Path, ...]
    height: tuple[Path, ...]
    crs: str | None
    model: Path
    threads: int = 1


class Session(Protocol):
    """What a job needs of tiles and model."""

    crs: pyproj.CRS
    grid: WorkingGrid
    model_name: str
    model_hash: str

    @property
    def faults(self) -> Sequence[str]:
        """A sentence for each tile that was left out so far."""

    @property
    def warnings(self) -> Sequence[str]:
        """Sentences on what to mind."""

    def source_at(self, x_m: float, y_m: float) -> tuple[str, str]:
        """Return name and image date ("" if unknown) of the tile at a place in grid metres."""

    @property
    def bounds_m(self) -> tuple[float, float, float, float]:
        """Least and greatest x and y of the tiles in grid metres."""

    def covers(self, x_m: float, y_m: float, reach_m: float = 0.0) -> bool:
        """Say whether a square of 2 `reach_m` around a place in grid metres touches the tiles."""

    def read(self, row: int, col: int, rows: int, cols: int) -> Patch:
        """Return a window of working pixels."""

    def fields(self, p: int, q: int) -> NDArray[np.int16]:
        """Return a page of fields, (256, 256, CHANNELS)."""

    def warm(self, places: NDArray[np.float64]) -> None:
        """Compute the fields around places (n, 2) in grid metres at once, reading ahead while the net works."""

    def trace(self, points: NDArray[np.float64]) -> Trace | Unplaced:
        """Trace from points (n, 2) in grid metres: the seed, then those to pass through."""

    def computed_pixels(self) -> int:
        """Return how many working pixels the net has looked at so far."""


TOO_SHORT = "The edge beside the seed is too short to be a line."

Opener = Callable[[Inputs], Session]


def page_of(x_m: float, y_m: float) -> tuple[int, int]:
    """Return the page (row, column) of fields at a place in grid metres."""
    return int(np.floor(-y_m / PAGE_M)), int(np.floor(x_m / PAGE_M))


def along_curve(page: tuple[int, int]) -> int:
    """Return the page's place on a Z-order curve, so that neighbours are worked on together."""
    total = 0
    row, col = page[0] + (1 << 31), page[1] + (1 << 31)
    for bit in range(32):
        total |= ((col >> bit) & 1) << (2 * bit) | ((row >> bit) & 1) << (2 * bit + 1)
    return total


class TilesSession:
    """A session over raster files and a model folder."""

    def __init__(self, inputs: Inputs) -> None:
        from roadhem.fields.model import Model
        from roadhem.fields.store import FieldStore
        from roadhem.tiles.mosaic import Mosaic

        self.model = Model.load(inputs.model)
        self.mosaic = Mosaic.open(inputs.tiles, inputs.height, inputs.crs)
        self.store = CountedStore(FieldStore(self.mosaic, self.model, threads=inputs.threads))
        self.crs, self.grid = self.mosaic.crs, self.mosaic.grid
        self.model_name, self.model_hash = self.model.name, str(self.model.card["weights_sha256"])
        self._dates = {tile.name: tile.image_date for tile in self.mosaic.tiles}

    @property
    def faults(self) -> Sequence[str]:
        """A sentence for each tile that was left out so far."""
        return self.mosaic.faults

    @property
    def warnings(self) -> Sequence[str]:
        """Sentences on what to mind."""
        return self.mosaic.warnings

    def source_at(self, x_m: float, y_m: float) -> tuple[str, str]:
        """Return name and image date of the tile at a place."""
        name = self.mosaic.source_at(x_m, y_m)
        return name, self._dates.get(name, "")

    @property
    def bounds_m(self) -> tuple[float, float, float, float]:
        """Least and greatest x and y of the tiles in grid metres."""
        return self.mosaic.bounds_m

    def covers(self, x_m: float, y_m: float, reach_m: float = 0.0) -> bool:
        """Say whether a square around a place touches the tiles."""
        top, left = int(np.floor((-y_m - reach_m) / PIXEL_M)), int(np.floor((x_m - reach_m) / PIXEL_M))
        side = max(1, round(2 * reach_m / PIXEL_M))
        return bool(self.mosaic.has_data(top, left, side, side))

    def read(self, row: int, col: int, rows: int, cols: int) -> Patch:
        """Return a window of working pixels."""
        return self.mosaic.read(row, col, rows, cols)

    def fields(self, p: int, q: int) -> NDArray[np.int16]:
        """Return a page of fields."""
        return self.store.page(p, q)

    def warm(self, places: NDArray[np.float64]) -> None:
        """Compute the fields around places at once."""
        self.store.load({page_of(float(x), float(y)) for x, y in places})

    def trace(self, points: NDArray[np.float64]) -> Trace | Unplaced:
        """Trace from points."""
        from roadhem.tracing.trace import trace_seed

        outcome = trace_seed(self.store, [(float(x), float(y)) for x, y in points])
        if isinstance(outcome, Trace) and len(outcome.points) < 2:
            return Unplaced(TOO_SHORT)
        return outcome

    def computed_pixels(self) -> int:
        """Return how many working pixels the net has looked at so far."""
        return self.store.computed * (PAGE * NET_STRIDE) ** 2


class CountedStore:
    """A field store that counts the pages it had to compute.

    Attributes
    ----------
    computed : pages so far.
    """

    def __init__(self, store: FieldStore) -> None:
        self._store = store
        self.computed = 0

    def page(self, p: int, q: int) -> NDArray[np.int16]:
        """Return a page, computed if need be."""
        self.computed += not self._store.ready(p, q)
        return self._store.page(p, q)

    def load(self, pages: Iterable[tuple[int, int]]) -> None:
        """Compute pages."""
        wanted = list(pages)
        self.computed += sum(not self._store.ready(p, q) for p, q in wanted)
        self._store.load(wanted)


def open_session(inputs: Inputs) -> Session:
    """Open tiles and model.

    Raises
    ------
    BadInput : no tile, or a height raster or the model, can be used.
    """
    return TilesSession(inputs)
