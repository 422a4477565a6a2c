"""The tracer on fields drawn from lines, apart from any net."""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
import shapely
from fields_made import Edge, MadeFields
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from roadhem.errors import RoadhemError
from roadhem.fields.layout import KINDS, SEEN
from roadhem.tracing.result import Trace, Unplaced
from roadhem.tracing.trace import Missing, attempt, trace_seed

Points = NDArray[np.float64]


def arc(x: float, y: float, radius: float, start: float, end: float) -> Points:
    """Points on an arc, degrees counter-clockwise from east."""
    a = np.radians(np.linspace(start, end, max(8, int(abs(end - start)) * 2)))
    return np.stack([x + radius * np.cos(a), y + radius * np.sin(a)], axis=1)


def wave(x: NDArray[np.float64] | float) -> Points:
    """Points of an S-curve at these x."""
    return np.stack([np.asarray(x, float), 8 * np.sin(np.asarray(x) / 10)], axis=-1)


S_CURVE = wave(np.linspace(0, 100, 500))


def cornered(turn: float, leg: float = 25.0) -> Points:
    """Two straights that meet at (30, -30) with a turn, degrees to the left."""
    corner = np.array([30.0, -30.0])
    into, out = np.radians(17.0), np.radians(17.0 + turn)
    return np.array(
        [
            corner - leg * np.array([np.cos(into), np.sin(into)]),
            corner,
            corner + leg * np.array([np.cos(out), np.sin(out)]),
        ]
    )


@cache
def s_view() -> MadeFields:
    return MadeFields([Edge(S_CURVE)], noise_m=0.02)


def traced(view: object, *points: tuple[float, float] | Points, **kwargs: float) -> Trace:
    result = attempt(view, [tuple(p) for p in points], **kwargs)
    assert isinstance(result, Trace), result
    return result


def farthest(trace: Trace, line: Points) -> float:
    """Greatest distance, metres, from the trace's points to a line."""
    return float(shapely.distance(shapely.points(trace.points), shapely.LineString(line)).max())


def hausdorff(trace: Trace, line: Points) -> float:
    return shapely.hausdorff_distance(shapely.LineString(trace.points), shapely.LineString(line), densify=0.01)


def reasons(trace: Trace) -> list[str]:
    return [doubt.reason for doubt in trace.doubts]


@pytest.mark.parametrize("radius", [1.28, 1.5, 3.0, 15.0])
def test_islands_close(radius: float) -> None:
    """Should close a round island into one ring with the surface left of it."""
    ring = arc(50, -50, radius, 360, 0)
    trace = traced(MadeFields([Edge(ring)], noise_m=0.02), (50 + radius + 0.2, -50))
    assert trace.closed
    assert trace.end_reason == trace.start_reason == "looped"
    assert np.array_equal(trace.points[0], trace.points[-1])
    assert not shapely.is_ccw(shapely.LinearRing(trace.points))
    assert shapely.LinearRing(trace.points).is_simple
    assert hausdorff(trace, ring) < 0.1


def test_square_island_closes() -> None:
    """Should close an island with four sharp corners."""
    ring = np.array([(40, -60), (40, -52), (52, -52), (52, -60), (40, -60)], float)
    trace = traced(MadeFields([Edge(ring)], noise_m=0.02), (46.0, -51.8))
    assert trace.closed
    assert hausdorff(trace, ring) < 0.12
    assert reasons(trace).count("sharp_turn") == 4


def test_island_with_hidden_part_closes() -> None:
    """Should close a ring across a hidden stretch, each place of it once."""
    ring = arc(50, -50, 6, 360, 0)
    trace = traced(MadeFields([Edge(ring)], noise_m=0.02, gaps=[(56, -50, 2)]), (44.1, -50))
    assert trace.closed
    assert abs(shapely.LineString(trace.points).length - shapely.LineString(ring).length) < 0.4
    assert hausdorff(trace, ring) < 0.2


@settings(max_examples=40, deadline=None)
@given(at=st.floats(20, 80), along=st.floats(-0.6, 0.6), across=st.floats(-0.6, 0.6))
def test_moved_seed_same_line(at: float, along: float, across: float) -> None:
    """Should give exactly the same points for a seed moved along or across by up to 0.6 m."""
    reference = traced(s_view(), wave(at))
    moved = traced(s_view(), wave(at + along) + np.array([0.0, across]))
    assert np.array_equal(moved.points, reference.points)
    assert moved.doubts == reference.doubts


def test_any_seed_same_line() -> None:
    """Should give the same line from either end of an edge with a corner and from the middle."""
    line = cornered(80)
    view = MadeFields([Edge(line)], noise_m=0.02)
    first, second = (traced(view, 0.9 * line[k] + 0.1 * line[1]) for k in (0, 2))
    assert hausdorff(first, second.points) < 0.05
    assert hausdorff(first, line) < 0.15


@pytest.mark.parametrize("noise", [0.0, 0.02, 0.04])
def test_straight_and_curved(noise: float) -> None:
    """Should follow within half the noise of a cell on average, and end where the edge ends."""
    view = MadeFields([Edge(S_CURVE)], noise_m=noise)
    trace = traced(view, wave(40.0))
    error = shapely.distance(shapely.points(trace.points), shapely.LineString(S_CURVE))
    assert error.mean() <= 0.005 + 0.5 * noise
    assert hausdorff(trace, S_CURVE) < 0.05 + 3 * noise
    assert (trace.start_reason, trace.end_reason) == ("end", "end")


def test_clothoid() -> None:
    """Should follow a transition curve from straight to a radius of 3 m."""
    s = np.linspace(0, 30, 600)
    heading = s**2 / (2 * 30 * 3.0)
    line = np.stack([np.cumsum(np.cos(heading)), np.cumsum(np.sin(heading))], axis=1) * (s[1] - s[0])
    trace = traced(MadeFields([Edge(line)], noise_m=0.02), line[200])
    assert hausdorff(trace, line) < 0.1


@pytest.mark.parametrize("turn", [60, -60, 90, -90, 120, -120])
@pytest.mark.parametrize("noise", [0.0, 0.03])
def test_corners_stay_sharp(turn: float, noise: float) -> None:
    """Should keep a sharp corner as one vertex, whichever side the surface is on."""
    line = cornered(turn)
    trace = traced(MadeFields([Edge(line)], noise_m=noise, seed=3), 0.5 * (line[0] + line[1]))
    away = np.hypot(*(trace.points - line[1]).T)
    vertex = int(np.argmin(away))
    assert away[vertex] < 0.12 + 5 * noise
    assert np.sort(away)[1] > 0.4
    before, after = trace.points[vertex] - trace.points[vertex - 2], trace.points[vertex + 2] - trace.points[vertex]
    cosine = before @ after / np.linalg.norm(before) / np.linalg.norm(after)
    assert abs(np.degrees(np.arccos(cosine)) - abs(turn)) < 12
    assert hausdorff(trace, line) < 0.12 + 3 * noise
    assert "sharp_turn" in reasons(trace)


def test_curves_are_no_corners() -> None:
    """Should not make a corner of a curb return of radius 1.5 m or more."""
    for radius in (1.5, 3.0, 5.0):
        bend = arc(50, -50, radius, 180, 90)
        line = np.concatenate([bend[:1] - [0, 20], bend, bend[-1:] + np.array([20, 0])])
        trace = traced(MadeFields([Edge(line)], noise_m=0.02), bend[0] - [0, 8])
        assert "sharp_turn" not in reasons(trace)
        assert hausdorff(trace, line) < 0.12


@pytest.mark.parametrize("gap", [3.0, 8.0, 13.0])
@pytest.mark.parametrize("radius", [0.0, 25.0, 12.0])
def test_gaps_are_bridged(gap: float, radius: float) -> None:
    """Should go on across a hidden stretch, flagged, with a spread that covers the error."""
    line = np.array([(0, -25), (100, -5)], float) if radius == 0 else arc(50, -50, radius, 200, -60)
    middle = (50.0, -15.0) if radius == 0 else (50.0, -50.0 + radius)
    view = MadeFields([Edge(line)], noise_m=0.02, gaps=[(*middle, gap / 2)])
    trace = traced(view, line[int(0.2 * len(line))] if radius else (20.0, -21.0))
    bridged = trace.seen == SEEN.index("bridged")
    error = shapely.distance(shapely.points(trace.points), shapely.LineString(line))
    assert bridged.any()
    assert np.all(error[bridged] < 2.5 * trace.sigma[bridged])
    assert error[bridged].max() < 0.2
    assert trace.sigma[bridged].max() > 1.2 * np.median(trace.sigma[~bridged])
    assert hausdorff(trace, line) < 0.25
    assert "bridged" in reasons(trace)


def test_long_gap_stops_unsure() -> None:
    """Should stop with `unsure` before a hidden stretch that is too long."""
    view = MadeFields([Edge([(0, -25), (100, -5)])], noise_m=0.02, gaps=[(60, -13, 11)])
    trace = traced(view, (20.0, -21.0))
    assert {trace.start_reason, trace.end_reason} == {"end", "unsure"}
    assert trace.points[:, 0].max() < 50.5


def test_gap_before_another_line_stops() -> None:
    """Should not jump to a line that does not continue the arc."""
    edges = [Edge([(0, -20), (45, -20)]), Edge([(52, -25), (90, -25)])]
    trace = traced(MadeFields(edges, noise_m=0.02), (20.0, -19.8))
    assert trace.points[:, 0].max() < 45.5


@pytest.mark.parametrize("aside", [0.3, 0.6, 0.9])
def test_other_line_beside(aside: float) -> None:
    """Should stay on the edge beside a gutter seam or curb back."""
    view = MadeFields([Edge(S_CURVE)], others=[S_CURVE + np.array([0.0, aside])], noise_m=0.02)
    assert np.array_equal(traced(view, wave(40.0)).points, traced(s_view(), wave(40.0)).points)


@pytest.mark.parametrize("aside", [0.7, 0.9, 1.2])
def test_second_edge_beside(aside: float) -> None:
    """Should stay on the edge that was clicked where another runs beside it, and say so."""
    line = np.array([(100, -5), (0, -25)], float)
    other = [(-40, -33 + aside), (140, 3 + aside)]
    trace = traced(MadeFields([Edge(line), Edge(other)], noise_m=0.02), (40.0, -17.2))
    assert farthest(trace, line) < 0.4
    assert "competing_line" in reasons(trace)


def test_narrow_median_closes() -> None:
    """Should turn at the noses of a median too narrow for the fields to show them, and close it."""
    ring = np.array([(20, -30), (20, -29), (60, -29), (60, -30), (20, -30)], float)
    trace = traced(MadeFields([Edge(ring)], noise_m=0.01), (40.0, -28.8))
    assert trace.closed
    assert hausdorff(trace, ring) < 0.5


def test_fork_is_noted() -> None:
    """Should go on along the edge at a fork and note the branch as a doubt."""
    edges = [Edge([(0, -30), (100, -30)]), Edge([(50, -30.6), (62, -34), (85, -45)])]
    trace = traced(MadeFields(edges, noise_m=0.01), (20.0, -29.8))
    assert trace.points[:, 0].max() > 99
    assert np.abs(trace.points[:, 1] + 30).max() < 0.45
    assert "fork" in reasons(trace)


def test_surface_lies_left() -> None:
    """Should direct the line so that the drive-over surface lies left, however the seed was found."""
    for line in (S_CURVE, S_CURVE[::-1]):
        trace = traced(MadeFields([Edge(line)]), wave(40.0))
        assert np.hypot(*(trace.points[0] - line[0])) < 0.2


def test_kinds_along_the_line() -> None:
    """Should tell raised from lowered curb along the line, without pieces shorter than a metre."""
    parts = [(0, 30, "raised"), (30, 34, "lowered"), (34, 70, "raised")]
    edges = [Edge([(start, -20), (end, -20)], kind=kind) for start, end, kind in parts]
    trace = traced(MadeFields(edges, noise_m=0.02), (20.0, -19.8))
    lowered = trace.points[trace.kind == KINDS.index("lowered"), 0]
    assert abs(lowered.min() - 30) < 0.6
    assert abs(lowered.max() - 34) < 0.6
    assert np.count_nonzero(np.diff(trace.kind)) == 2


def test_runs_to_the_border() -> None:
    """Should run right up to where the tiles end, within a cell, and tell missing data from it."""
    view = MadeFields([Edge([(0, 10), (100, 30)])], bounds=(10, 0, 80, 60), holes=[(60, 15, 64, 30)])
    trace = traced(view, (50, 20))
    assert {trace.start_reason, trace.end_reason} == {"tile_border", "no_data"}
    assert 10 < trace.points[:, 0].min() < 10.2
    assert 59.8 < trace.points[:, 0].max() < 60


def test_limit() -> None:
    """Should stop at the limit, around the seed, and say so."""
    trace = traced(s_view(), wave(50.0), limit_m=30.0)
    assert trace.start_reason == trace.end_reason == "length_limit"
    assert 29 < shapely.LineString(trace.points).length < 31.5
    assert shapely.LineString(trace.points).distance(shapely.Point(wave(50.0))) < 0.1


def test_unplaced_in_words() -> None:
    """Should say in words why a seed gave nothing."""
    view = MadeFields([Edge([(0, 10), (100, 30)])], bounds=(10, 0, 80, 60), holes=[(60, 15, 64, 30)])
    for seed, words in (((50, 30), "sure"), ((200, 30), "outside the tiles"), ((62, 20), "no data")):
        result = attempt(view, [seed])
        assert isinstance(result, Unplaced)
        assert words in result.reason


def test_lane_line_unplaced() -> None:
    """Should refuse a line with drive-over surface on both sides."""
    result = attempt(MadeFields([Edge([(0, 10), (100, 10)], lane=True)]), [(50, 10.2)])
    assert isinstance(result, Unplaced)
    assert "both sides" in result.reason


def test_stub_unplaced() -> None:
    """Should give no line where less than a metre of edge is seen."""
    view = MadeFields([Edge([(30, -20), (30.6, -20)])])
    result = attempt(view, [(30.3, -20)])
    assert isinstance(result, Unplaced)


def test_passes_within_the_radius() -> None:
    """Should never take a line further from the seed than the radius."""
    for away in (0.5, 0.9, 1.1, 1.5):
        result = attempt(MadeFields([Edge([(0, -20), (60, -20)])]), [(30, -20 + away)], radius_m=1.0)
        assert isinstance(result, Unplaced if away > 1 else Trace)


class Slow:
    """A store that computes pages only when told to; some may be there from the start."""

    def __init__(self, fields: MadeFields, have: tuple[tuple[int, int], ...] = ()) -> None:
        self._fields, self._have = fields, set(have)

    def page(self, p: int, q: int) -> NDArray[np.int16] | None:
        return self._fields.page(p, q) if (p, q) in self._have else None

    def load(self, pages: object) -> None:
        self._have.update(pages)


@pytest.mark.parametrize("have", [(), ((0, 0),), ((-1, 0), (-1, 1)), ((0, 1), (-1, 0))])
def test_pages_arrive_late(have: tuple[tuple[int, int], ...]) -> None:
    """Should ask for missing pages and give the same line whichever come first."""
    assert isinstance(attempt(Slow(s_view()), [tuple(wave(40.0))]), Missing)
    late = trace_seed(Slow(s_view(), have), [tuple(wave(40.0))])
    assert isinstance(late, Trace)
    assert np.array_equal(late.points, traced(s_view(), wave(40.0)).points)
    assert np.array_equal(late.sigma, traced(s_view(), wave(40.0)).sigma)


def test_store_that_forgets() -> None:
    """Should say what to do when loaded pages are not kept."""

    class Forgetful(Slow):
        def load(self, pages: object) -> None:
            self._have = set(pages)

    with pytest.raises(RoadhemError, match="memory"):
        trace_seed(Forgetful(s_view()), [tuple(wave(40.0))])


@pytest.mark.parametrize("off", [0.0, 0.3])
def test_guided_passes_every_point(off: float) -> None:
    """Should pass through every point given, in either order, and go on beyond the last."""
    places = [wave(30.0), wave(45.0) + np.array([0, off]), wave(70.0) - np.array([0, off])]
    for order in (places, places[::-1]):
        trace = traced(s_view(), *order)
        line = shapely.LineString(trace.points)
        assert all(line.distance(shapely.Point(place)) < 1e-6 for place in order[1:])
        assert hausdorff(trace, S_CURVE) < 0.1 + off


def test_guided_across_a_long_gap() -> None:
    """Should reach a point beyond a gap that following does not cross, by a least-cost path through the fields."""
    view = MadeFields([Edge(S_CURVE)], noise_m=0.02, gaps=[(*wave(60.0), 10.0)])
    assert traced(view, wave(40.0)).points[:, 0].max() < 60
    trace = traced(view, wave(40.0), wave(60.0), wave(90.0))
    line = shapely.LineString(trace.points)
    assert line.is_simple
    assert max(line.distance(shapely.Point(wave(x))) for x in (60.0, 90.0)) < 1e-6
    assert trace.points[:, 0].max() > 99
    assert trace.points[:, 0].min() < 1
    assert hausdorff(trace, S_CURVE) < 1.2
    assert "bridged" in reasons(trace)
