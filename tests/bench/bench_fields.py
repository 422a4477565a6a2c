"""How much the fields cost beside the raw net: reading, resampling, quantising, threads.

    python tests/bench/bench_fields.py

Every figure is the least of several runs; ratios compare runs of one process. Nothing is asserted: a busy machine
would fail it.
"""

from __future__ import annotations

import statistics
import tempfile
import threading
import time
from collections.abc import Callable
from functools import partial
from pathlib import Path

import numpy as np
import rasterio
from affine import Affine
from numpy.typing import NDArray
from scipy.ndimage import gaussian_filter

from roadhem.fields.inputs import RELIEF_REACH, relief, stack_inputs
from roadhem.fields.layout import COVER_VALID
from roadhem.fields.model import Model
from roadhem.fields.store import PAGE_PIXELS, FieldStore
from roadhem.tiles.mosaic import Mosaic

P, Q = -109_374, 9_768
SIDE = 4
"""Pages along a side of the bench's tile: 204.8 m."""


def photograph(side: int, seed: int = 1) -> NDArray[np.uint8]:
    """Return something that compresses like a photograph (3, side, side)."""
    rng = np.random.default_rng(seed)
    plane = gaussian_filter(rng.normal(0, 1, (side, side)).astype(np.float32), 3) * 400 + 128
    bands = [plane + rng.normal(0, 3, plane.shape) + shift for shift in (0, 8, -8)]
    return np.clip(np.stack(bands), 0, 255).astype(np.uint8)


def write(path: Path, array: NDArray[np.generic], pixel: float, compress: str | None) -> Path:
    profile = {"driver": "GTiff", "count": array.shape[0], "height": array.shape[1], "width": array.shape[2],
               "dtype": array.dtype.name, "crs": "EPSG:25832", "tiled": True, "blockxsize": 512, "blockysize": 512,
               "transform": Affine(pixel, 0, Q * 51.2, 0, -pixel, -P * 51.2)}  # fmt: skip
    with rasterio.open(path, "w", **profile, **({"compress": compress} if compress else {})) as sink:
        sink.write(array)
    return path


def least(action: Callable[[], object], times: int = 5) -> float:
    """Return the least seconds of several runs."""
    spent = []
    for _ in range(times):
        start = time.perf_counter()
        action()
        spent.append(time.perf_counter() - start)
    return min(spent)


def clocked(action: Callable[[], object]) -> tuple[float, float]:
    """Return seconds on the clock and of the processor."""
    wall, cpu = time.perf_counter(), time.process_time()
    action()
    return time.perf_counter() - wall, time.process_time() - cpu


def bench_reading(folder: Path) -> None:
    print("reading and resampling, ms for each 512 x 512 block without halo; first: new handle, cold block cache")
    places = [(P * PAGE_PIXELS + r * 512, Q * PAGE_PIXELS + c * 512) for r in range(SIDE) for c in range(SIDE)]
    for pixel in (0.05, 0.10, 0.20):
        array = photograph(round(SIDE * 51.2 / pixel))
        for compress in (None, "deflate"):
            path = write(folder / f"{pixel} {compress}.tif", array, pixel, compress)
            first: list[float] = []
            for _ in range(3):
                path.touch()
                mosaic = Mosaic.open([path])
                first += [least(partial(mosaic.read, *place, 512, 512), 1) for place in places]
            again = [least(partial(mosaic.read, *place, 512, 512), 3) for place in places]
            print(f"  {pixel * 100:3.0f} cm {compress or 'plain':8} first {statistics.median(first) * 1e3:6.2f}"
                  f"   again {statistics.median(again) * 1e3:6.2f}")


def bench_inputs() -> None:
    side = PAGE_PIXELS + 192
    height = photograph(side + 2 * RELIEF_REACH)[0].astype(np.float32)
    colour, valid = photograph(side).astype(np.float32) / 255, np.ones((side, side), bool)
    reliefs = relief(height)
    print(f"relief {least(lambda: relief(height)) * 1e3:.1f} ms, stacking "
          f"{least(lambda: stack_inputs(colour, valid, *reliefs)) * 1e3:.1f} ms for {side} x {side} px")


def bench_threads(model: Model) -> None:
    side = PAGE_PIXELS + 2 * model.halo
    tiles = np.random.default_rng(0).normal(0, 1, (1, 6, side, side)).astype(np.float32)
    one, two = (model.session(side, side, threads) for threads in (1, 2))
    for session in (one, two):
        session.run(["fields"], {"tiles": tiles})

    def pair() -> None:
        both = [threading.Thread(target=one.run, args=(["fields"], {"tiles": tiles})) for _ in range(2)]
        for thread in both:
            thread.start()
        for thread in both:
            thread.join()

    print(f"net, ms for each page: one thread {least(lambda: one.run(['fields'], {'tiles': tiles})) * 1e3:.0f}, "
          f"two threads {least(lambda: two.run(['fields'], {'tiles': tiles})) * 1e3:.0f}, "
          f"two callers of one session with a thread each {least(pair) / 2 * 1e3:.0f}")


def bench_store(folder: Path, model: Model) -> None:
    """Compare `FieldStore.load` with raw runs on the same blocks, prepared beforehand; sessions warm, pages not."""
    image = write(folder / "image.tif", photograph(SIDE * 512), 0.10, "deflate")
    ground = gaussian_filter(np.random.default_rng(2).normal(0, 30, (1, 820, 820)), (0, 9, 9)).astype(np.float32)
    height = write(folder / "height.tif", ground, 0.25, "deflate")
    for mosaic in (Mosaic.open([image]), Mosaic.open([image], [height])):
        for strip in (1, 2):
            places = [(P + p, Q + q) for p in range(SIDE) for q in range(SIDE)]
            (raw, raw_cpu), (loads, loads_cpu) = race(mosaic, model, places, strip)
            words = "height" if mosaic.has_height else "no height"
            print(f"{len(places)} pages, strips of {strip}, {words}: load {loads:.2f} s, "
                  f"raw net {raw:.2f} s, ratio {loads / raw:.3f} (of processor time {loads_cpu / raw_cpu:.3f}); "
                  f"{len(places) * 0.262144 / loads:.2f} Mpx/s")


def race(
    mosaic: Mosaic, model: Model, places: list[tuple[int, int]], strip: int
) -> tuple[tuple[float, float], tuple[float, float]]:
    """Return the least seconds, on the clock and of the processor, of raw runs and of loads, taken in turns."""
    rows, cols = PAGE_PIXELS + 2 * model.halo, strip * PAGE_PIXELS + 2 * model.halo
    session = model.session(rows, cols, 1)
    prepared = []
    for p, q in places:
        if q % strip == 0:
            patch = mosaic.read(p * PAGE_PIXELS - model.halo, q * PAGE_PIXELS - model.halo, rows, cols)
            prepared.append(stack_inputs(patch.colour, patch.cover == COVER_VALID)[None])

    def run() -> None:
        for tiles in prepared:
            session.run(["fields"], {"tiles": tiles})

    store = FieldStore(mosaic, model, threads=1, cache_mb=0, strip=strip)
    store.load(places)
    run()
    raw, loads = [], []
    for _ in range(5):
        raw.append(clocked(run))
        loads.append(clocked(lambda: store.load(places)))
    return tuple(np.min(raw, axis=0)), tuple(np.min(loads, axis=0))


def main() -> None:
    model = Model.load()
    with tempfile.TemporaryDirectory() as folder:
        bench_reading(Path(folder))
        bench_inputs()
        bench_threads(model)
        bench_store(Path(folder), model)


if __name__ == "__main__":
    main()
