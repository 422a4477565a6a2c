"""What a whole `trace` costs beside the raw net, and what a click costs.

    python tests/bench/bench_trace.py build/demo      # a folder with image.tif, height.tif, seeds.gpkg

The raw net runs on the same blocks as the trace needed, with its fastest thread count, in the same process. Nothing
is asserted: a busy machine would fail it.
"""

from __future__ import annotations

import argparse
import statistics
import tempfile
import time
from pathlib import Path

import numpy as np
import shapely
from pyogrio.raw import read

import roadhem
from roadhem.fields.inputs import INPUTS
from roadhem.fields.model import Model
from roadhem.fields.store import PAGE_PIXELS, FieldStore
from roadhem.jobs.session import Inputs, open_session
from roadhem.jobs.trace import TraceJob, trace_tiles
from roadhem.tiles.mosaic import Mosaic
from roadhem.tracing.result import Trace
from roadhem.tracing.trace import trace_seed

SHIPPED = Path(roadhem.__file__).parent / "shelf"
THREADS = (1, 2)
EDGE_M = 100.0
"""Clicks are timed on traces stopped at this length."""


def run_seconds(model: Model, rows: int, cols: int, threads: int, times: int = 5) -> float:
    """Least seconds of one run of the net on a block of rows x cols pages."""
    shape = tuple(n * PAGE_PIXELS + 2 * model.halo for n in (rows, cols))
    session = model.session(*shape, threads)
    tiles = np.random.default_rng(0).standard_normal((1, len(INPUTS), *shape)).astype(np.float32)
    spent = []
    for _ in range(times):
        start = time.perf_counter()
        session.run(None, {"tiles": tiles})
        spent.append(time.perf_counter() - start)
    return min(spent)


def bench_batch(folder: Path, inputs: Inputs, model: Model, repeats: int) -> None:
    """Whole runs of `trace`, after one that compiles."""
    with tempfile.TemporaryDirectory() as scratch:
        job = TraceJob(inputs, str(folder / "seeds.gpkg"), Path(scratch) / "lines.gpkg")
        trace_tiles(job, open_session, lambda done, total: None)
        spent = []
        for _ in range(repeats):
            start = time.perf_counter()
            summary = trace_tiles(job, open_session, lambda done, total: None)
            spent.append(time.perf_counter() - start)
    pages = summary.session.computed_pixels() // PAGE_PIXELS**2
    single = {threads: run_seconds(model, 1, 1, threads) for threads in THREADS}
    best = min(single.values())
    print(f"net, one page: {', '.join(f'{t} threads {1e3 * s:.0f} ms' for t, s in single.items())}")
    print(f"trace: {summary.seeds} seeds, {summary.km:.2f} km, {pages} pages, {min(spent):.2f} s "
          f"= {min(spent) / (pages * best):.2f} x the raw net's {pages * best:.2f} s")


def bench_click(folder: Path, inputs: Inputs, model: Model, clicks: int) -> None:
    """One click each: cold on an empty store, then warm on the same store."""
    mosaic = Mosaic.open(inputs.tiles, inputs.height, None)
    seeds = shapely.from_wkb(read(folder / "seeds.gpkg", layer="seeds")[2])[:clicks]
    points = mosaic.grid.to_metres([(p.x, p.y) for p in seeds])
    cold, warm = [], []
    for point in points:
        store = FieldStore(mosaic, model, threads=inputs.threads)
        store.load([(0, 0)])
        for spent in (cold, warm):
            start = time.perf_counter()
            outcome = trace_seed(store, [tuple(point)], limit_m=EDGE_M)
            if isinstance(outcome, Trace):
                spent.append(1e3 * (time.perf_counter() - start))
    for name, spent in (("cold", cold), ("warm", warm)):
        print(f"click, {EDGE_M:.0f} m, {name}: median {statistics.median(spent):.1f} ms, "
              f"95 % {np.percentile(spent, 95):.1f} ms of {len(spent)}")


def main() -> None:
    """Print all figures."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("folder", type=Path)
    parser.add_argument("--model", type=Path, default=SHIPPED)
    parser.add_argument("--threads", type=int, default=2)
    parser.add_argument("--repeats", type=int, default=3)
    parser.add_argument("--clicks", type=int, default=20)
    options = parser.parse_args()
    model = Model.load(options.model)
    height = tuple(p for p in [options.folder / "height.tif"] if p.exists())
    inputs = Inputs((options.folder / "image.tif",), height, None, options.model, options.threads)
    bench_batch(options.folder, inputs, model, options.repeats)
    bench_click(options.folder, inputs, model, options.clicks)


if __name__ == "__main__":
    main()
