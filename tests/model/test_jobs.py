"""Whole runs: the same lines however they are made, going on after a kill, proposing seeds."""

from __future__ import annotations

import json
import os
import random
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pyogrio
import pytest
import shapely
from drawn import PIXEL, drawn_model, drawn_pixels, write_seeds, write_tile
from made_session import EAST, NORTH, STREETS, MadeSession, on_street, open_made, open_slow, streets
from numpy.typing import NDArray

from roadhem.errors import BadInput, RoadhemError
from roadhem.jobs.journal import Journal, packed, unpacked
from roadhem.jobs.mark import MarkJob, mark_tiles
from roadhem.jobs.session import Inputs, along_curve, open_session
from roadhem.jobs.trace import TraceJob, trace_tiles
from roadhem.tracing.result import Doubt, Trace, Unplaced

INPUTS = Inputs((Path("made.tif"),), (), None, Path("model"))
PLACES = [on_street(number, x) for number in range(STREETS) for x in (20, 33, 48, 61, 77)]


def silent(done: int, total: int) -> None:
    """Show nothing."""


def lines(path: Path) -> list[bytes]:
    """All edges, as written, sorted."""
    return sorted(pyogrio.raw.read(str(path), layer="edges")[2])


def column(path: Path, layer: str, name: str) -> NDArray[np.object_]:
    """A column of a layer."""
    return pyogrio.raw.read(str(path), layer=layer, columns=[name])[3][0]


@pytest.fixture
def job(tmp_path: Path) -> TraceJob:
    """Twenty seeds on four streets, and one on grass."""
    seeds = write_seeds(tmp_path / "seeds.gpkg", [*PLACES, (EAST + 50, NORTH - 2)])
    return TraceJob(INPUTS, str(seeds), tmp_path / "out.gpkg")


def test_one_line_per_street(job: TraceJob) -> None:
    """Should give one line per street, lay down every seed and count what it did."""
    summary = trace_tiles(job, open_made, silent)
    assert (summary.seeds, summary.lines, summary.unplaced) == (21, STREETS, 1)
    assert summary.km == pytest.approx(STREETS * 0.091, rel=0.05)
    assert len(lines(job.out)) == STREETS
    ids = set(column(job.out, "seeds", "seed_id")) | set(column(job.out, "unplaced", "seed_id"))
    assert ids == {str(n) for n in range(1, 22)}
    assert set(column(job.out, "seeds", "edge_id")) == set(column(job.out, "edges", "edge_id"))
    assert not Path(f"{job.out}.journal").exists()


def test_every_edge_passes_its_seed(job: TraceJob) -> None:
    """Should keep every edge within a metre of the seed whose id it bears."""
    trace_tiles(job, open_made, silent)
    places = dict(zip((str(n) for n in range(1, 22)), [*PLACES, (0, 0)], strict=True))
    geometry = shapely.from_wkb(pyogrio.raw.read(str(job.out), layer="edges")[2])
    for seed_id, line in zip(column(job.out, "edges", "seed_id"), geometry, strict=True):
        assert line.distance(shapely.Point(places[seed_id])) <= 1.0


def test_workers_and_order_do_not_matter(job: TraceJob, tmp_path: Path) -> None:
    """Should write the same lines for one worker and three, and for seeds in any order."""
    trace_tiles(job, open_made, silent)
    shuffled = list(enumerate([*PLACES, (EAST + 50, NORTH - 2)], 1))
    random.Random(5).shuffle(shuffled)
    mixed = write_seeds(tmp_path / "mixed.gpkg", [p for _, p in shuffled], [str(n) for n, _ in shuffled])
    other = TraceJob(INPUTS, str(mixed), tmp_path / "other.gpkg", workers=3)
    trace_tiles(other, open_made, silent)
    assert lines(other.out) == lines(job.out)
    for layer, name in (("edges", "edge_id"), ("edges", "seed_id"), ("stretches", "to_m"), ("seeds", "edge_id")):
        np.testing.assert_array_equal(column(other.out, layer, name), column(job.out, layer, name))


def test_tiles_in_any_order_and_cut_give_the_same_lines(tmp_path: Path) -> None:
    """Should give the same lines from one tile, from four and from four named the other way round."""
    pixels = drawn_pixels([edge.line[::15] for edge in streets()], 1000)
    whole = [write_tile(tmp_path / "whole.tif", pixels)]
    quarters = [
        write_tile(
            tmp_path / f"part{row}{col}.tif",
            pixels[:, 500 * row : 500 * row + 500, 500 * col : 500 * col + 500],
            east=EAST + 500 * PIXEL * col,
            north=NORTH - 500 * PIXEL * row,
        )
        for row in (0, 1)
        for col in (0, 1)
    ]
    seeds = write_seeds(tmp_path / "seeds.gpkg", PLACES[::5])
    model = drawn_model(tmp_path / "model")
    outcomes = []
    for name, tiles in {"whole": whole, "quarters": quarters, "turned": quarters[::-1]}.items():
        job = TraceJob(Inputs(tuple(tiles), (), None, model), str(seeds), tmp_path / f"{name}.gpkg")
        assert trace_tiles(job, open_session, silent).lines == STREETS
        outcomes.append(lines(job.out))
    assert outcomes[0] == outcomes[1] == outcomes[2]


def test_resume_goes_on_where_it_stopped(job: TraceJob) -> None:
    """Should keep what was traced before an interruption, trace only the rest, and give the same lines."""
    whole = TraceJob(INPUTS, job.seeds, job.out.with_name("whole.gpkg"))
    trace_tiles(whole, open_made, silent)

    def stop_after_a_chunk(done: int, total: int) -> None:
        if done:
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        trace_tiles(job, open_made, stop_after_a_chunk)
    journal = Path(f"{job.out}.journal")
    kept = len(journal.read_text().splitlines()) - 1
    assert kept == 8
    with journal.open("a") as stream:
        stream.write('{"seed": "20", "unpl')  # a line cut short by the kill

    opened: list[MadeSession] = []
    again = TraceJob(INPUTS, job.seeds, job.out, resume=True)
    trace_tiles(again, lambda inputs: opened.append(open_made(inputs)) or opened[0], silent)
    assert opened[0].traced == len(PLACES) + 1 - kept
    assert lines(job.out) == lines(whole.out)
    assert not journal.exists()


def test_resume_refuses_another_job(job: TraceJob) -> None:
    """Should refuse a journal of other seeds, and start afresh without --resume."""
    with Journal(job.out, "another job", resume=False) as journal:
        journal.add({"1": Unplaced("nothing")})
    with pytest.raises(BadInput, match=r"another run.*delete it or run without --resume"):
        trace_tiles(TraceJob(INPUTS, job.seeds, job.out, resume=True), open_made, silent)
    assert not job.out.exists()
    assert trace_tiles(job, open_made, silent).lines == STREETS


def test_two_runs_do_not_share_an_output(job: TraceJob) -> None:
    """Should refuse to write what another run is writing, and leave that run's journal alone."""
    with Journal(job.out, "first", resume=False) as journal:
        with pytest.raises(BadInput, match="Another run is writing"):
            trace_tiles(job, open_made, silent)
        journal.add({"1": Unplaced("nothing")})
        assert journal.path.read_text().count("\n") == 2
    assert sorted(os.listdir(job.out.parent)) == ["out.gpkg.journal", "seeds.gpkg"]


def test_resume_refuses_a_damaged_journal(job: TraceJob) -> None:
    """Should refuse a journal that is none."""
    Path(f"{job.out}.journal").write_text("milk\n")
    with pytest.raises(BadInput, match="damaged"):
        trace_tiles(TraceJob(INPUTS, job.seeds, job.out, resume=True), open_made, silent)


def test_outcomes_survive_the_journal_bit_for_bit() -> None:
    """Should read back exactly what was written, through JSON."""
    rng = np.random.default_rng(1)
    trace = Trace(
        rng.normal(5e6, 1, (50, 2)), rng.uniform(0.01, 1, 50), rng.integers(0, 3, 50, np.uint8),
        rng.integers(0, 3, 50, np.uint8), True, "looped", "looped", (Doubt(1 / 3, 2 / 3, "fork", 0.1),),
    )  # fmt: skip
    back = unpacked(json.loads(json.dumps(packed(trace))))
    assert isinstance(back, Trace)
    assert back.points.tobytes() == trace.points.tobytes()
    assert back.sigma.tobytes() == trace.sigma.tobytes()
    assert (back.kind.tolist(), back.seen.tolist()) == (trace.kind.tolist(), trace.seen.tolist())
    assert (back.closed, back.end_reason, back.doubts) == (True, "looped", trace.doubts)


@pytest.mark.parametrize("workers", [1, 2])
def test_killed_at_any_moment(job: TraceJob, workers: int) -> None:
    """Should leave the old file whole when killed, no worker behind, and a journal to go on with."""
    job.out.write_text("old")
    script = (
        "from pathlib import Path; from made_session import open_slow; from roadhem.jobs.session import Inputs\n"
        "from roadhem.jobs.trace import TraceJob, trace_tiles\n"
        "if __name__ == '__main__':\n"
        "    inputs = Inputs((Path('made.tif'),), (), None, Path('model'))\n"
        f"    job = TraceJob(inputs, {job.seeds!r}, Path({str(job.out)!r}), workers={workers})\n"
        "    trace_tiles(job, open_slow, lambda done, total: None)\n"
    )
    path = job.out.with_name("run.py")
    path.write_text(script)
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join([str(Path(__file__).parents[1]), *sys.path])}
    process = subprocess.Popen([sys.executable, str(path)], env=environment, start_new_session=True)
    journal = Path(f"{job.out}.journal")
    until = time.monotonic() + 120
    while time.monotonic() < until and not (journal.exists() and journal.read_text().count("\n") > 1):
        time.sleep(0.02)
        assert process.poll() is None
    process.kill()
    process.wait()
    assert job.out.read_text() == "old"
    _wait_for_end_of_group(process.pid)
    kept = journal.read_text().count("\n") - 1
    assert kept >= 8
    again = TraceJob(INPUTS, job.seeds, job.out, resume=True)
    summary = trace_tiles(again, open_slow, silent)
    assert summary.lines == STREETS
    assert summary.session.traced <= len(PLACES) + 1 - kept


def _wait_for_end_of_group(group: int) -> None:
    """Fail if processes of a killed run are still there after a while."""
    until = time.monotonic() + 20
    while time.monotonic() < until:
        try:
            os.killpg(group, 0)
        except ProcessLookupError:
            return
        time.sleep(0.1)
    os.killpg(group, signal.SIGKILL)
    pytest.fail("worker processes outlived the run that started them")


def test_faults_of_workers_are_told(job: TraceJob) -> None:
    """Should list a tile that a worker found unusable, once."""
    faulty = TraceJob(INPUTS, job.seeds, job.out, workers=2)
    summary = trace_tiles(faulty, open_faulty, silent)
    assert summary.faults == ["made.tif is cut short."]


def open_faulty(inputs: Inputs) -> MadeSession:
    """Open streets on a tile that turns out to be broken."""
    return MadeSession(faults=["made.tif is cut short."])


def test_a_lost_worker_is_told(job: TraceJob) -> None:
    """Should say that a worker was lost, as when memory runs out, and leave the journal to go on with."""
    with pytest.raises(RoadhemError, match=r"worker process was lost.*--resume"):
        trace_tiles(TraceJob(INPUTS, job.seeds, job.out, workers=2), open_deadly, silent)
    assert not job.out.exists()
    assert Path(f"{job.out}.journal").exists()


class DeadlySession(MadeSession):
    """Ends its process at the first trace."""

    def trace(self, points: NDArray[np.float64]) -> Trace | Unplaced:
        """End as the system ends a process that takes too much memory."""
        os.kill(os.getpid(), signal.SIGKILL)
        return super().trace(points)


def open_deadly(inputs: Inputs) -> MadeSession:
    """Open streets that nobody survives."""
    return DeadlySession()


def test_neighbours_follow_each_other_on_the_curve() -> None:
    """Should walk a square of pages quarter by quarter, also across the CRS's zero."""
    pages = [(p, q) for p in range(-2, 2) for q in range(-2, 2)]
    order = sorted(pages, key=along_curve)
    assert order[:4] == [(-2, -2), (-2, -1), (-1, -2), (-1, -1)]
    assert order[-4:] == [(0, 0), (0, 1), (1, 0), (1, 1)]


def test_mark_proposes_one_seed_per_edge(tmp_path: Path) -> None:
    """Should put one seed on each street, on the line, and the same ones again."""
    outcomes = []
    for name in ("a.gpkg", "b.gpkg"):
        summary = mark_tiles(MarkJob(INPUTS, tmp_path / name), open_made, silent)
        assert summary.seeds == STREETS
        _, _, geometry, _ = pyogrio.raw.read(str(tmp_path / name), layer="seeds")
        outcomes.append(sorted(geometry))
        points = shapely.from_wkb(geometry)
        nearest = [
            min(range(STREETS), key=lambda n: p.distance(shapely.LineString(streets()[n].line))) for p in points
        ]
        assert sorted(nearest) == list(range(STREETS))
        assert all(
            p.distance(shapely.LineString(streets()[n].line)) < 0.1 for p, n in zip(points, nearest, strict=True)
        )
    assert outcomes[0] == outcomes[1]


def test_marks_can_be_traced(tmp_path: Path) -> None:
    """Should give, from its own proposals, the lines that hand-set seeds give."""
    mark_tiles(MarkJob(INPUTS, tmp_path / "marks.gpkg"), open_made, silent)
    seeds = write_seeds(tmp_path / "hand.gpkg", PLACES[::5])
    outcomes = []
    for source, out in ((tmp_path / "marks.gpkg", "m.gpkg"), (seeds, "h.gpkg")):
        trace_tiles(TraceJob(INPUTS, str(source), tmp_path / out), open_made, silent)
        outcomes.append(lines(tmp_path / out))
    assert outcomes[0] == outcomes[1]
