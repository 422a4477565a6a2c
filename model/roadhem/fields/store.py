"""The field store: pages of quantised fields, computed where asked and kept under a memory bound."""

from __future__ import annotations

import threading
from collections import OrderedDict
from collections.abc import Iterable, Iterator, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from itertools import takewhile

import numpy as np
import onnxruntime
from numpy.typing import NDArray

from roadhem.fields.inputs import RELIEF_REACH, relief, stack_inputs
from roadhem.fields.layout import CHANNELS, COVER, COVER_OUTSIDE, COVER_VALID, NET_STRIDE
from roadhem.fields.model import Model
from roadhem.fields.quantise import quantise
from roadhem.tiles.mosaic import Mosaic

PAGE = 256
"""Cells along a side of a page."""

PAGE_PIXELS = PAGE * NET_STRIDE
"""Working pixels along a side of a page."""

PAGE_BYTES = PAGE * PAGE * CHANNELS * 2

Place = tuple[int, int]
"""(p, q) of a page or block: rows of pages southward, columns eastward."""

Page = NDArray[np.int16]


@dataclass(frozen=True)
class _Block:
    """Pages that one run of the net computes: rows x cols of them from page (p, q)."""

    p: int
    q: int
    rows: int
    cols: int

    @property
    def pages(self) -> list[Place]:
        """All pages of the block, row by row."""
        return [(self.p + i, self.q + j) for i in range(self.rows) for j in range(self.cols)]


@dataclass(frozen=True)
class _Prepared:
    """What one run of the net needs: the net's input, and the cover of the block's cells without the halo."""

    block: _Block
    inputs: NDArray[np.float32]
    cover: NDArray[np.uint8]


class FieldStore:
    """Fields of a mosaic by pages of 256 x 256 cells (51.2 m).

    Page (p, q) holds cells i in [p * 256, (p + 1) * 256) and j likewise of q. A page is the same to the last bit
    whatever block it is computed in, whenever, and whatever tiles lie elsewhere.

    Parameters
    ----------
    mosaic, model : what to look at, and with which net.
    threads : threads of the net.
    cache_mb : memory for pages; the pages of a single load are all returned, even past it.
    strip : pages that one run of the net computes at most, beside one another in a row or column.
    """

    def __init__(
        self, mosaic: Mosaic, model: Model, *, threads: int = 1, cache_mb: float = 256, strip: int = 2
    ) -> None:
        self.mosaic, self.model = mosaic, model
        self._pages: OrderedDict[Place, Page] = OrderedDict()
        self._most = max(1, int(cache_mb * 2**20) // PAGE_BYTES)
        self._strip = strip
        self._threads = threads
        self._sessions: dict[tuple[int, int], onnxruntime.InferenceSession] = {}
        self._reader = ThreadPoolExecutor(1, thread_name_prefix="roadhem-read")
        self._lock = threading.RLock()

    def page(self, p: int, q: int) -> Page:
        """Return page (p, q), (256, 256, CHANNELS) int16, read-only; it is computed if need be."""
        return self.load([(p, q)])[p, q]

    def ready(self, p: int, q: int) -> bool:
        """Tell whether page (p, q) is at hand without a run of the net."""
        return (p, q) in self._pages or not self._holds_data((p, q))

    def load(self, pages: Iterable[Place]) -> dict[Place, Page]:
        """Return pages, computing those that are missing; the next block is read while the net works on this one."""
        with self._lock:
            wanted = sorted(set(pages))
            found = {place: page for place in wanted if (page := self._at_hand(place)) is not None}
            missing = [place for place in wanted if place not in found]
            for prepared in self._prepared(self._blocks(missing)):
                for place, page in self._run(prepared):
                    found[place] = page
                    self._keep(place, page)
            return found

    def _at_hand(self, place: Place) -> Page | None:
        if place in self._pages:
            self._pages.move_to_end(place)
            return self._pages[place]
        return None if self._holds_data(place) else BLANK

    def _keep(self, place: Place, page: Page) -> None:
        self._pages[place] = page
        self._pages.move_to_end(place)
        while len(self._pages) > self._most:
            self._pages.popitem(last=False)

    def _holds_data(self, place: Place) -> bool:
        return self.mosaic.has_data(place[0] * PAGE_PIXELS, place[1] * PAGE_PIXELS, PAGE_PIXELS, PAGE_PIXELS)

    def _pixels(self, pages: int) -> int:
        """Working pixels along a block of `pages` pages and its halo."""
        return pages * PAGE_PIXELS + 2 * self.model.halo

    def _blocks(self, missing: Iterable[Place]) -> list[_Block]:
        """Cover pages by strips along rows, else down columns: a strip spends less on its halo."""
        left = sorted(missing)
        blocks: list[_Block] = []
        while left:
            p, q = left[0]
            block = _Block(p, q, 1, self._run_length(left, p, q, 0, 1))
            if block.cols == 1:
                block = _Block(p, q, self._run_length(left, p, q, 1, 0), 1)
            blocks.append(block)
            left = [place for place in left if place not in block.pages]
        return blocks

    def _run_length(self, places: Sequence[Place], p: int, q: int, down: int, along: int) -> int:
        """Count the pages from (p, q) on that follow each other among `places`, at most a strip."""
        steps = takewhile(lambda k: (p + k * down, q + k * along) in places, range(self._strip))
        return len(list(steps))

    def _prepared(self, blocks: Sequence[_Block]) -> Iterator[_Prepared]:
        """Yield blocks ready for the net, one read ahead."""
        ahead = [self._reader.submit(self._prepare, block) for block in blocks[:1]]
        for following in [*blocks[1:], None]:
            if not ahead:
                return
            prepared = ahead.pop().result()
            if following is not None:
                ahead.append(self._reader.submit(self._prepare, following))
            yield prepared

    def _prepare(self, block: _Block) -> _Prepared:
        halo, rows, cols = self.model.halo, self._pixels(block.rows), self._pixels(block.cols)
        row, col = block.p * PAGE_PIXELS - halo, block.q * PAGE_PIXELS - halo
        colour, cover = self.mosaic.read_colour(row, col, rows, cols)
        reach = RELIEF_REACH
        height = self.mosaic.read_height(row - reach, col - reach, rows + 2 * reach, cols + 2 * reach)
        reliefs = (None, None) if height is None else relief(height)
        inputs = stack_inputs(colour, cover == COVER_VALID, *reliefs)
        return _Prepared(block, inputs[None], _cell_cover(cover[halo : rows - halo, halo : cols - halo]))

    def _run(self, prepared: _Prepared) -> Iterator[tuple[Place, Page]]:
        """Run the net on a block and yield its pages."""
        block = prepared.block
        shape = self._pixels(block.rows), self._pixels(block.cols)
        if shape not in self._sessions:
            self._sessions[shape] = self.model.session(*shape, self._threads)
        (fields,) = self._sessions[shape].run(["fields"], {"tiles": prepared.inputs})
        margin = self.model.halo // NET_STRIDE
        for p, q in block.pages:
            top, left = (p - block.p) * PAGE, (q - block.q) * PAGE
            cover = prepared.cover[top : top + PAGE, left : left + PAGE]
            part = fields[0, :, margin + top : margin + top + PAGE, margin + left : margin + left + PAGE]
            yield (p, q), quantise(part, cover, self.model.calibration)


def _cell_cover(cover: NDArray[np.uint8]) -> NDArray[np.uint8]:
    """Least cover of each cell's pixels: a cell is valid where all of them are."""
    step = NET_STRIDE
    corners = [cover[i::step, j::step] for i in range(step) for j in range(step)]
    return np.minimum.reduce(corners)


def _blank() -> Page:
    page = np.zeros((PAGE, PAGE, CHANNELS), np.int16)
    page[..., COVER] = COVER_OUTSIDE
    page.flags.writeable = False
    return page


BLANK = _blank()
"""The page where there is no tile."""
