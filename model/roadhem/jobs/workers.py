"""Tracing many seeds, in this process or in several; the outcome is the same for any number."""

from __future__ import annotations

import multiprocessing
import os
import signal
import threading
from collections.abc import Iterator, Sequence
from concurrent.futures import FIRST_COMPLETED, Future, ProcessPoolExecutor, wait
from concurrent.futures.process import BrokenProcessPool
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from roadhem.errors import RoadhemError
from roadhem.jobs.session import Inputs, Opener, Session
from roadhem.tracing.result import Trace, Unplaced

Task = tuple[str, NDArray[np.float64]]
"""A seed's id and its points in grid metres."""


class Batch(NamedTuple):
    """What became of a chunk of seeds.

    Attributes
    ----------
    outcomes : by seed. pixels : working pixels the net looked at for them. faults : of the session so far.
    """

    outcomes: dict[str, Trace | Unplaced]
    pixels: int
    faults: tuple[str, ...]


CHUNK = 8
"""Seeds handed out at once: neighbours, so that they share pages of fields."""

OUTSIDE = "The seed lies outside all tiles."


def trace_here(session: Session, tasks: Sequence[Task]) -> Iterator[Batch]:
    """Trace in this process, chunk by chunk."""
    for chunk in _chunks(tasks):
        yield _trace_chunk(session, chunk)


def trace_apart(inputs: Inputs, opener: Opener, tasks: Sequence[Task], workers: int) -> Iterator[Batch]:
    """Trace in `workers` processes, each with a session of its own; as `trace_here`, in any order.

    Raises
    ------
    RoadhemError : a worker was killed, as happens when memory runs out.
    """
    pool = ProcessPoolExecutor(
        workers, multiprocessing.get_context("spawn"), initializer=_start_worker, initargs=(inputs, opener)
    )
    waiting: set[Future[Batch]] = set()
    try:
        waiting = {pool.submit(_trace_in_worker, chunk) for chunk in _chunks(tasks)}
        while waiting:
            finished, waiting = wait(waiting, return_when=FIRST_COMPLETED)
            for future in finished:
                yield future.result()
    except BrokenProcessPool as error:
        raise RoadhemError(
            "A worker process was lost, maybe for want of memory; run again with --resume and fewer --workers"
        ) from error
    finally:
        if waiting:
            _end_workers()
        pool.shutdown(cancel_futures=True)


def _end_workers() -> None:
    """End the workers at once; what they have not handed in is lost, which the journal allows for."""
    for worker in multiprocessing.active_children():
        worker.terminate()


def _chunks(tasks: Sequence[Task]) -> list[Sequence[Task]]:
    return [tasks[start : start + CHUNK] for start in range(0, len(tasks), CHUNK)]


def _trace_chunk(session: Session, chunk: Sequence[Task]) -> Batch:
    before = session.computed_pixels()
    session.warm(np.concatenate([points for _, points in chunk]))
    outcomes = {seed_id: _trace_one(session, points) for seed_id, points in chunk}
    return Batch(outcomes, session.computed_pixels() - before, tuple(session.faults))


def _trace_one(session: Session, points: NDArray[np.float64]) -> Trace | Unplaced:
    if not session.covers(float(points[0, 0]), float(points[0, 1])):
        return Unplaced(OUTSIDE)
    return session.trace(points)


_session: Session | None = None


def _start_worker(inputs: Inputs, opener: Opener) -> None:
    global _session
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    threading.Thread(target=_end_with_parent, daemon=True).start()
    _session = opener(inputs)


def _end_with_parent() -> None:
    parent = multiprocessing.parent_process()
    if parent is not None:
        parent.join()
        os._exit(1)


def _trace_in_worker(chunk: Sequence[Task]) -> Batch:
    assert _session is not None, "the initializer has run"
    return _trace_chunk(_session, chunk)
