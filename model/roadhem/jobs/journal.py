"""The journal beside an output: what is done so far, so that a killed run can go on."""

from __future__ import annotations

import json
import os
from pathlib import Path
from types import TracebackType
from typing import Any, TextIO

import numpy as np
from filelock import FileLock, Timeout
from numpy.typing import NDArray

from roadhem.errors import BadInput, RoadhemError
from roadhem.tracing.result import Doubt, Trace, Unplaced


class Journal:
    """JSON lines: first the hash of the job, then one per seed.

    Parameters
    ----------
    target : the output; the journal is `target`.journal.
    job : hash of everything the outcome depends on.
    resume : take over what a journal of the same job holds; without it the journal starts afresh.

    Raises
    ------
    BadInput : another run has the same output, or `resume` and the journal there belongs to another job.
    """

    def __init__(self, target: Path, job: str, resume: bool) -> None:
        self.path = target.with_name(target.name + ".journal")
        self.done: dict[str, Trace | Unplaced] = {}
        self._lock = FileLock(target.with_name(target.name + ".lock"), timeout=0)
        try:
            self._lock.acquire()
        except Timeout:
            raise BadInput(f"Another run is writing {target}; wait for it or name another file") from None
        try:
            self._stream = self._open(job, resume)
        except BaseException:
            self._unlock()
            raise

    def _open(self, job: str, resume: bool) -> TextIO:
        keep = self._read(job) if resume and self.path.exists() else 0
        stream = self.path.open("r+" if keep else "w", encoding="utf-8", newline="\n")
        if keep:
            stream.truncate(keep)
            stream.seek(keep)
        else:
            _write(stream, self.path, [{"job": job}])
        return stream

    def _unlock(self) -> None:
        self._lock.release()
        Path(self._lock.lock_file).unlink(missing_ok=True)

    def __enter__(self) -> Journal:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._stream.close()
        self._unlock()

    def add(self, outcomes: dict[str, Trace | Unplaced]) -> None:
        """Append what became of some seeds, on disk before this returns."""
        self.done.update(outcomes)
        entries = [{"seed": seed_id, **packed(outcome)} for seed_id, outcome in outcomes.items()]
        _write(self._stream, self.path, entries)

    def remove(self) -> None:
        """Delete the journal: the output is there."""
        self._stream.close()
        self.path.unlink(missing_ok=True)

    def _read(self, job: str) -> int:
        """Take over whole lines; return up to which byte they go (a last line cut short is dropped)."""
        content = self.path.read_bytes()
        good = content[: content.rfind(b"\n") + 1]
        lines = good.splitlines()
        if not lines:
            return 0
        try:
            header, *entries = [json.loads(line) for line in lines]
            if header["job"] != job:
                raise BadInput(
                    f"{self.path} belongs to another run (other tiles, seeds, model or version); "
                    "delete it or run without --resume"
                )
            self.done = {entry["seed"]: unpacked(entry) for entry in entries}
        except (ValueError, KeyError, TypeError) as error:
            if isinstance(error, BadInput):
                raise
            raise BadInput(f"{self.path} is damaged; delete it or run without --resume") from error
        return len(good)


def _write(stream: TextIO, path: Path, entries: list[dict[str, Any]]) -> None:
    try:
        stream.write("".join(json.dumps(entry) + "\n" for entry in entries))
        stream.flush()
        os.fsync(stream.fileno())
    except OSError as error:
        raise RoadhemError(f"{path} could not be written ({error.strerror}); free space and --resume") from error


def packed(outcome: Trace | Unplaced) -> dict[str, Any]:
    """Return an outcome as plain JSON values; floats come back bit for bit."""
    if isinstance(outcome, Unplaced):
        return {"unplaced": outcome.reason}
    return {
        "points": outcome.points.tolist(),
        "sigma": outcome.sigma.tolist(),
        "kind": outcome.kind.tolist(),
        "seen": outcome.seen.tolist(),
        "closed": bool(outcome.closed),
        "reasons": [outcome.start_reason, outcome.end_reason],
        "doubts": [[doubt.x, doubt.y, doubt.reason, doubt.weight] for doubt in outcome.doubts],
    }


def unpacked(entry: dict[str, Any]) -> Trace | Unplaced:
    """Undo `packed`."""
    if "unplaced" in entry:
        return Unplaced(entry["unplaced"])
    points: NDArray[np.float64] = np.array(entry["points"], dtype=np.float64)
    return Trace(
        points=points,
        sigma=np.array(entry["sigma"], dtype=np.float64),
        kind=np.array(entry["kind"], dtype=np.uint8),
        seen=np.array(entry["seen"], dtype=np.uint8),
        closed=entry["closed"],
        start_reason=entry["reasons"][0],
        end_reason=entry["reasons"][1],
        doubts=tuple(Doubt(*doubt) for doubt in entry["doubts"]),
    )
