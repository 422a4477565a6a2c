"""The tracer on fields drawn from lines, apart from any net."""

from __future__ import annotations

import numpy as np
import pytest
import shapely
from fields_made import Edge, MadeFields
from numpy.typing import NDArray

from roadhem.tracing.result import Trace, Unplaced
from roadhem.tracing.trace import Missing, attempt, trace_seed


def arc(x: float, y: float, radius: float, start: float, end: float) -> NDArray[np.float64]:
    """Points on an arc, degrees counter-clockwise from east."""
    a = np.radians(np.linspace(start, end, max(8, int(abs(end - start)) * 2)))
    return np.stack([x + radius * np.cos(a), y + radius * np.sin(a)], axis=1)


def s_curve() -> NDArray[np.float64]:
    x = np.linspace(0, 100, 500)
    return np.stack([x, 8 * np.sin(x / 10)], axis=1)


def traced(view: MadeFields, *points: tuple[float, float], **kwargs: float) -> Trace:
    result = attempt(view, points, **kwargs)
    assert isinstance(result, Trace), result
    return result


def farthest(trace: Trace, line: NDArray[np.float64]) -> float:
    """Greatest distance, metres, from the trace's points to a line."""
    return float(shapely.distance(shapely.points(trace.points), shapely.LineString(line)).max())


@pytest.mark.parametrize("radius", [1.3, 1.5, 2.0, 3.0, 5.0, 15.0])
def test_islands_close(radius: float) -> None:
    """Should close a round island into one ring with the surface left of it."""
    ring = arc(50, -50, radius, 360, 0)
    trace = traced(MadeFields([Edge(ring)], noise_m=0.02), (50 + radius + 0.2, -50))
    assert trace.closed
    assert trace.end_reason == trace.start_reason == "looped"
    assert np.array_equal(trace.points[0], trace.points[-1])
    assert not shapely.is_ccw(shapely.LinearRing(trace.points))
    assert farthest(trace, ring) < 0.08


@pytest.mark.parametrize("across", [-0.6, -0.2, 0.3, 0.6])
@pytest.mark.parametrize("along", [-0.6, 0.0, 0.25, 0.6])
def test_moved_seed_same_line(across: float, along: float) -> None:
    """Should give exactly the same points for a seed moved along or across."""
    view = MadeFields([Edge(s_curve())], noise_m=0.02)
    reference = traced(view, (40.0, 8 * np.sin(4.0)))
    moved = traced(view, (40.0 + along, 8 * np.sin(4.0 + along / 10) + across))
    assert np.array_equal(moved.points, reference.points)


def test_runs_to_the_border() -> None:
    """Should run right up to where the tiles end, within a cell."""
    view = MadeFields([Edge([(0, 10), (100, 30)])], bounds=(10, 0, 80, 60))
    trace = traced(view, (50, 20))
    assert (trace.start_reason, trace.end_reason) == ("tile_border", "tile_border")
    assert trace.points[:, 0].min() < 10.2
    assert trace.points[:, 0].max() > 79.8


def test_no_edge_unplaced() -> None:
    """Should say in words why a seed gave nothing."""
    view = MadeFields([Edge([(0, 10), (100, 30)])], bounds=(10, 0, 80, 60))
    assert isinstance(attempt(view, [(50, 30)]), Unplaced)
    outside = attempt(view, [(200, 30)])
    assert isinstance(outside, Unplaced)
    assert "outside the tiles" in outside.reason


def test_lane_line_unplaced() -> None:
    """Should refuse a line with drive-over surface on both sides."""
    view = MadeFields([Edge([(0, 10), (100, 10)], lane=True)])
    result = attempt(view, [(50, 10.2)])
    assert isinstance(result, Unplaced)
    assert "both sides" in result.reason


class Slow:
    """A store that computes pages only when told to, a few at a time."""

    def __init__(self, fields: MadeFields) -> None:
        self._fields, self._have = fields, set()

    def page(self, p: int, q: int) -> NDArray[np.int16] | None:
        return self._fields.page(p, q) if (p, q) in self._have else None

    def load(self, pages: object) -> None:
        self._have.update(pages)


def test_pages_arrive_late() -> None:
    """Should ask for missing pages and give the same line as with all at hand."""
    view = MadeFields([Edge(s_curve())], noise_m=0.02)
    missing = attempt(Slow(view), [(40.0, -6.0)])
    assert isinstance(missing, Missing)
    late = trace_seed(Slow(view), [(40.0, -6.0)])
    assert isinstance(late, Trace)
    assert np.array_equal(late.points, traced(view, (40.0, -6.0)).points)
