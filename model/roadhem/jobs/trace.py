"""The batch: every seed traced on frozen fields, one canonical merge, one GeoPackage."""

from __future__ import annotations

import hashlib
import time
from collections.abc import Callable
from dataclasses import dataclass, field
from datetime import datetime, timezone
from pathlib import Path
from typing import Any

import numpy as np

import roadhem
from roadhem.errors import BadInput
from roadhem.jobs.journal import Journal
from roadhem.jobs.session import Inputs, Opener, Session, along_curve, page_of
from roadhem.jobs.workers import Task, trace_apart, trace_here
from roadhem.lines import geojson, geopackage
from roadhem.lines.files import check_target
from roadhem.lines.merge import merge
from roadhem.lines.records import Lineage, Recorder, TracedLayers
from roadhem.lines.seeds import Seed, digest, read_seeds
from roadhem.lines.vectors import best_transformer, split_source
from roadhem.tracing.result import Trace, Unplaced

SUFFIXES = (geopackage.SUFFIX, *geojson.SUFFIXES)
Progress = Callable[[int, int], None]
"""Called with seeds done and seeds in all."""


@dataclass(frozen=True)
class TraceJob:
    """What to trace and how.

    Attributes
    ----------
    inputs : tiles and model. seeds : as `read_layer` takes them. out : GeoPackage or GeoJSON.
    workers : processes. resume : go on where a killed run stopped. allow_ballpark : accept coarse transformations.
    """

    inputs: Inputs
    seeds: str
    out: Path
    workers: int = 1
    resume: bool = False
    allow_ballpark: bool = False


@dataclass(frozen=True)
class TraceSummary:
    """What came of it; `layers`, `session` and `faults` are for those who go on with it."""

    seeds: int
    lines: int
    km: float
    hidden_km: float
    unplaced: int
    seconds: float
    mpx_per_s: float
    faults: list[str]
    warnings: list[str]
    layers: TracedLayers = field(repr=False)
    session: Session = field(repr=False)

    def figures(self) -> dict[str, Any]:
        """Return the figures alone, by name."""
        names = ("seeds", "lines", "km", "hidden_km", "unplaced", "seconds", "mpx_per_s", "faults", "warnings")
        return {name: getattr(self, name) for name in names}


def trace_tiles(job: TraceJob, opener: Opener, progress: Progress) -> TraceSummary:
    """Run a trace job.

    Raises
    ------
    BadInput, RoadhemError : see the sentence; the old output, if any, is still there.
    """
    started = time.monotonic()
    check_target(job.out, SUFFIXES)
    _check_apart(job)
    if job.workers < 1:
        raise BadInput("--workers must be at least 1")
    session = opener(job.inputs)
    seeds = read_seeds(job.seeds, session.crs, job.allow_ballpark)
    write = _writer(job, session, seeds)
    with Journal(job.out, _job_hash(job, session, seeds), job.resume) as journal:
        work = _trace_all(job, opener, session, seeds, journal, progress)
        layers = _record(session, seeds, journal.done)
        write(layers)
        journal.remove()
    return _summary(session, seeds, layers, work, time.monotonic() - started)


def _check_apart(job: TraceJob) -> None:
    read = [*job.inputs.tiles, *job.inputs.height, Path(split_source(job.seeds)[0])]
    if job.out.exists() and any(path.exists() and path.samefile(job.out) for path in read):
        raise BadInput(f"{job.out} is read by this run; name another file to write")


@dataclass
class _Work:
    pixels: int = 0
    faults: set[str] = field(default_factory=set)


def _trace_all(
    job: TraceJob, opener: Opener, session: Session, seeds: list[Seed], journal: Journal, progress: Progress
) -> _Work:
    tasks = [task for task in _tasks(session, seeds) if task[0] not in journal.done]
    done = total = len(journal.done)
    total += len(tasks)
    work = _Work()
    progress(done, total)
    if job.workers == 1 or len(tasks) < 2:
        batches = trace_here(session, tasks)
    else:
        batches = trace_apart(job.inputs, opener, tasks, min(job.workers, len(tasks)))
    for batch in batches:
        journal.add(batch.outcomes)
        work.pixels += batch.pixels
        work.faults.update(batch.faults)
        done += len(batch.outcomes)
        progress(done, total)
    return work


def _tasks(session: Session, seeds: list[Seed]) -> list[Task]:
    """Seeds that can be tried, those on neighbouring pages next to each other."""
    tasks = [(seed.seed_id, session.grid.to_metres(seed.points)) for seed in seeds if not seed.fault]
    return sorted(tasks, key=lambda task: (along_curve(page_of(*task[1][0])), task[0]))


def _record(session: Session, seeds: list[Seed], outcomes: dict[str, Trace | Unplaced]) -> TracedLayers:
    """Merge the traces and lay down every seed: with its edge, or among the unplaced."""
    lineage = Lineage(session.model_name, f"roadhem {roadhem.__version__}", _now())
    recorder = Recorder(session.crs, session.grid, session, lineage)
    placed: list[tuple[Seed, Trace]] = []
    for seed in sorted(seeds, key=_by_id):
        outcome = Unplaced(seed.fault) if seed.fault else outcomes[seed.seed_id]
        if isinstance(outcome, Trace):
            placed.append((seed, outcome))
        else:
            place = seed.points[0] if len(seed.points) else None
            recorder.add_unplaced(seed.seed_id, place, outcome.reason)
    places = session.grid.to_metres([seed.points[0] for seed, _ in placed]).reshape(-1, 2)
    merged = merge([trace for _, trace in placed], places)
    for index, trace in enumerate(merged.traces):
        mine = [n for n, edge in enumerate(merged.edge_of) if edge == index]
        edge_id = recorder.add_edge(trace, [(placed[n][0].seed_id, places[n]) for n in mine])
        for n in mine:
            recorder.add_seed(placed[n][0].seed_id, placed[n][0].points[0], edge_id)
    return recorder.layers


def _writer(job: TraceJob, session: Session, seeds: list[Seed]) -> Callable[[TracedLayers], None]:
    """Choose the format now, so that a transformation that is refused is refused before the work."""
    if job.out.suffix.lower() == geopackage.SUFFIX:
        return lambda layers: geopackage.write_geopackage(job.out, layers, session.crs)
    points = np.concatenate([seed.points for seed in seeds])
    bounds = np.concatenate([points.min(axis=0), points.max(axis=0)]) if len(points) else np.zeros(4)
    to_lonlat = best_transformer(session.crs, geojson.WGS84, bounds, str(job.out), job.allow_ballpark)
    return lambda layers: geojson.write_geojson(job.out, layers, to_lonlat)


def _job_hash(job: TraceJob, session: Session, seeds: list[Seed]) -> str:
    total = hashlib.sha256(f"{roadhem.__version__}\0{session.model_hash}\0{job.inputs.crs}\0".encode())
    total.update(digest(seeds).encode())
    for path in (*job.inputs.tiles, None, *job.inputs.height):
        if path is not None and path.exists():
            status = path.stat()
            total.update(f"{path.resolve()}\0{status.st_size}\0{status.st_mtime_ns}\0".encode())
        else:
            total.update(f"{path}\0".encode())
    return total.hexdigest()


def _summary(session: Session, seeds: list[Seed], layers: TracedLayers, work: _Work, seconds: float) -> TraceSummary:
    rows = layers.edges.rows
    return TraceSummary(
        seeds=len(seeds),
        lines=len(rows),
        km=round(sum(row["length_m"] for row in rows) / 1000, 3),
        hidden_km=round(sum(row["hidden_m"] for row in rows) / 1000, 3),
        unplaced=len(layers.unplaced.rows),
        seconds=round(seconds, 1),
        mpx_per_s=round(work.pixels / 1e6 / seconds, 2),
        faults=sorted({*session.faults, *work.faults}),
        warnings=list(session.warnings),
        layers=layers,
        session=session,
    )


def _by_id(seed: Seed) -> tuple[int, int, str]:
    number = seed.seed_id.isdigit()
    return (0, int(seed.seed_id), "") if number else (1, 0, seed.seed_id)


def _now() -> str:
    return datetime.now(timezone.utc).isoformat(timespec="seconds").replace("+00:00", "Z")
